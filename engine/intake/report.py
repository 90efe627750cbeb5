"""What became of every row that was read: the load report."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import pandas as pd
import pyarrow as pa

from engine.intake.identifiers import names_a_person
from engine.intake.normal import REPAIRS
from engine.intake.placing import Taken


@dataclass(frozen=True)
class LoadReport:
    """Rows read, used and refused, and what was changed on the way.

    ``tables``    table, rows_in, rows_used, rows_refused (in = used + refused)
    ``sources``   source, table, rows_read, encoding
    ``refused``   table, column, code, rows_refused
    ``repaired``  table, column, repair, values_repaired; over all rows read
    ``unknown``   table, column, rows_used, unknown_count, unknown_frac; over rows used
    ``ignored``   columns of the sources the log does not have, as "file: column"
    ``withheld``  columns not taken in because they name a person
    """

    tables: pd.DataFrame
    sources: pd.DataFrame
    refused: pd.DataFrame
    repaired: pd.DataFrame
    unknown: pd.DataFrame
    ignored: tuple[str, ...]
    withheld: tuple[str, ...]

    def text(self) -> str:
        """The report as plain lines, for a terminal."""
        lines = []
        for row in self.sources.to_dict("records"):
            lines.append(f"{row['source']}: {row['rows_read']} rows of {row['table']}")
        for row in self.tables.to_dict("records"):
            lines.append(
                f"{row['table']}: {row['rows_in']} rows in = {row['rows_used']} used "
                f"+ {row['rows_refused']} refused"
            )
        for row in self.refused.to_dict("records"):
            where = ".".join(filter(None, (row["table"], row["column"])))
            lines.append(f"refused, {row['code']}: {row['rows_refused']} ({where})")
        for row in self.repaired.to_dict("records"):
            said = REPAIRS[row["repair"]]
            where = f"{row['table']}.{row['column']}"
            lines.append(f"{where}: {row['values_repaired']} {said}")
        lines += self._unknown_lines()
        lines += [f"not taken in, names a person: {name}" for name in self.withheld]
        lines += [f"not taken in, no such column: {name}" for name in self.ignored]
        return "\n".join(lines)

    def _unknown_lines(self) -> list[str]:
        lines = []
        for table, rows in self.unknown.groupby("table", sort=False):
            frac = rows.set_index("column")["unknown_frac"]
            never = [str(name) for name in frac.index[frac == 1]]
            some = [f"{n} {f:.1%}" for n, f in frac[(frac > 0) & (frac < 1)].items()]
            if some:
                lines.append(f"{table}, share unknown: {', '.join(some)}")
            if never:
                lines.append(f"{table}, unknown in every row: {', '.join(never)}")
        return lines


def report_of(
    taken: Sequence[Taken],
    rows: Mapping[str, pa.Table],
    bad: pa.Table,
    repaired: pd.DataFrame,
) -> LoadReport:
    """The report over the sources, the rows used, the rows refused and the repairs."""
    refused = bad.select(["table", "column", "code"]).to_pandas()
    by = ["table", "column", "repair"]
    return LoadReport(
        tables=_accounts(rows, refused),
        sources=pd.DataFrame(
            [
                (t.source.name, t.table.name, t.source.rows_read, t.source.encoding)
                for t in taken
            ],
            columns=["source", "table", "rows_read", "encoding"],
        ),
        refused=refused.groupby(["table", "column", "code"], as_index=False).agg(
            rows_refused=("code", "size")
        ),
        repaired=repaired.groupby(by, sort=False, as_index=False).sum(),
        unknown=_unknown(rows),
        ignored=tuple(name for name, person in _untaken(taken) if not person),
        withheld=tuple(name for name, person in _untaken(taken) if person),
    )


def _accounts(rows: Mapping[str, pa.Table], refused: pd.DataFrame) -> pd.DataFrame:
    counts = refused["table"].value_counts()
    used = {name: len(table) for name, table in rows.items()}
    lost = {name: int(counts.get(name, 0)) for name in rows}
    return pd.DataFrame(
        [(name, used[name] + lost[name], used[name], lost[name]) for name in rows],
        columns=["table", "rows_in", "rows_used", "rows_refused"],
    )


def _unknown(rows: Mapping[str, pa.Table]) -> pd.DataFrame:
    found = pd.DataFrame(
        [
            (name, column, len(table), table[column].null_count)
            for name, table in rows.items()
            for column in table.column_names
        ],
        columns=["table", "column", "rows_used", "unknown_count"],
    )
    among = found["rows_used"].where(found["rows_used"] > 0)
    return found.assign(unknown_frac=found["unknown_count"] / among)


def _untaken(taken: Sequence[Taken]) -> list[tuple[str, bool]]:
    return [
        (f"{one.source.name}: {head}", names_a_person(head))
        for one in taken
        for head in one.untaken
    ]
