"""The command ``aerosol-review``: what can be done without a screen.

Exit 0 done · 2 bad input, one clear line on stderr · 1 a fault of ours.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
from collections.abc import Callable, Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

from engine.errors import EngineError, UnknownId

if TYPE_CHECKING:
    from engine.physics.validation import Result

DONE, FAULT, BAD_INPUT = 0, 1, 2

ABOUT = (
    "Reviews logged aerosol treatments of ventilated patients: setups, filters, "
    "sensors. Findings need clinical confirmation; local policy and licensed "
    "practice decide."
)


def main(arguments: Sequence[str] | None = None) -> int:
    """Runs one command; returns the exit code."""
    chosen = _parser().parse_args(arguments)
    try:
        return chosen.run(chosen) or DONE
    except EngineError as problem:
        print(f"aerosol-review: {_one_line(problem)}", file=sys.stderr)
        return BAD_INPUT
    except KeyboardInterrupt:
        print("aerosol-review: stopped; nothing half-written is kept", file=sys.stderr)
        return BAD_INPUT
    except BrokenPipeError:
        return DONE
    except Exception as fault:
        if os.environ.get("AEROSOL_REVIEW_TRACE"):
            raise
        print(
            f"aerosol-review: a fault of ours ({type(fault).__name__}: "
            f"{_one_line(fault)}); "
            "set AEROSOL_REVIEW_TRACE=1 to see where",
            file=sys.stderr,
        )
        return FAULT


def _one_line(problem: object) -> str:
    """A message that moves no cursor and breaks no line, whatever a file is called."""
    shown = "".join(c if c.isprintable() else " " for c in str(problem))
    return " ".join(shown.split())


class _OneLine(argparse.ArgumentParser):
    """A parser whose complaint is one line."""

    def error(self, message: str) -> NoReturn:
        self.exit(BAD_INPUT, f"aerosol-review: {_one_line(message)}; see --help\n")


def _parser() -> argparse.ArgumentParser:
    parser = _OneLine(prog="aerosol-review", description=ABOUT)
    parser.set_defaults(run=_open_demo)
    commands = parser.add_subparsers(title="commands", metavar="")

    add = _adder(commands)
    one = add("open", _open, "open the app on a log")
    one.add_argument("log", type=Path, metavar="LOG")

    one = add("demo", _demo, "write the invented department")
    one.add_argument("log", type=Path, metavar="LOG")
    one.add_argument("--months", type=_positive, default=6)
    one.add_argument("--treatments-per-month", type=_positive, default=800)
    one.add_argument("--seed", type=_whole, default=1)

    one = add("intake", _intake, "raw exports -> log, with a load report")
    one.add_argument("source", type=Path, nargs="+", metavar="SOURCE")
    one.add_argument("--map", type=Path, metavar="MAP", help="how to read the exports")
    one.add_argument("--into", type=Path, required=True, metavar="LOG")
    one.add_argument(
        "--site-zone", metavar="ZONE", help="default: the map's zone, else UTC"
    )

    one = add("replay", _replay, "balance, answers, findings and run.json")
    one.add_argument("log", type=Path, metavar="LOG")
    one.add_argument("--out", type=Path, required=True, metavar="DIR")
    _judged(one)

    one = add("report", _report, "a printable report")
    one.add_argument(
        "kind", choices=("month", "topics", "incident", "filters", "scenario")
    )
    one.add_argument("log", type=Path, metavar="LOG")
    one.add_argument("--out", type=Path, required=True, metavar="FILE.html|.pdf|.xlsx")
    one.add_argument("--month", metavar="YYYY-MM", help="default: the last whole month")
    one.add_argument("--incident", metavar="ID")
    one.add_argument("--journal", type=Path, metavar="FILE")
    one.add_argument(
        "--shared",
        action="store_true",
        help="a copy without dates, devices, patients and small groups",
    )
    _judged(one)

    add("verify", _verify, "published values against the engine, a line each")

    one = add("journal", _journal, "recompute the hash chain of a journal")
    one.add_argument("check", choices=("check",))
    one.add_argument("file", type=Path, metavar="FILE")
    return parser


def _adder(commands: argparse._SubParsersAction) -> Callable:
    def add(name: str, run: Callable, help: str) -> argparse.ArgumentParser:
        one = commands.add_parser(name, help=help, description=help)
        one.set_defaults(run=run)
        return one

    return add


def _judged(one: argparse.ArgumentParser) -> None:
    one.add_argument("--policy", default="common_practice", metavar="POLICY")
    one.add_argument("--scenario", metavar="SCENARIO", help="a name or a TOML file")


def _whole(text: str) -> int:
    try:
        return int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(
            f"must be a whole number; got {text[:40]}"
        ) from None


def _positive(text: str) -> int:
    value = _whole(text)
    if value < 1:
        raise argparse.ArgumentTypeError(f"must be at least 1; got {value}")
    return value


def _open_demo(chosen: argparse.Namespace) -> int:
    return _serve(None)


def _open(chosen: argparse.Namespace) -> int:
    from engine import open_log

    open_log(chosen.log).close()
    return _serve(chosen.log)


def _serve(log: Path | None) -> int:
    from reviewapp.serve import streamlit_command, streamlit_environment

    environment = streamlit_environment(log)
    return subprocess.run(streamlit_command(), env=environment, check=False).returncode


def _demo(chosen: argparse.Namespace) -> None:
    from engine.simulate import write_department

    write_department(
        chosen.log,
        months=chosen.months,
        treatments_per_month=chosen.treatments_per_month,
        seed=chosen.seed,
    )
    _say(f"wrote {chosen.log}: an invented department, nothing in it is real")


def _intake(chosen: argparse.Namespace) -> int:
    from engine.intake import take_in
    from engine.intake.mapping import load_map

    report = take_in(
        chosen.source,
        chosen.into,
        site_zone=chosen.site_zone or load_map(chosen.map).site_zone or "UTC",
        created_at=datetime.now(UTC).replace(tzinfo=None),
        mapping=chosen.map,
    )
    print(report.text())
    return DONE


def _replay(chosen: argparse.Namespace) -> None:
    from engine import load_policy, open_log
    from engine.replay import replay_to

    log = open_log(chosen.log)
    stamp = replay_to(
        log,
        load_policy(chosen.policy),
        chosen.out,
        scenario=_scenario(chosen.scenario),
        progress=_progress(),
    )
    log.close()
    _say(
        f"{stamp['treatments']:,} treatments replayed; rows in {stamp['rows_in']:,} = "
        f"used {stamp['rows_used']:,} + refused {stamp['rows_refused']:,}"
    )


def _report(chosen: argparse.Namespace) -> None:
    from reviewapp.reports.write import write_report

    write_report(
        chosen.kind,
        chosen.log,
        chosen.out,
        policy=chosen.policy,
        scenario=_scenario(chosen.scenario),
        month=chosen.month,
        incident_id=chosen.incident,
        journal=chosen.journal,
        shared=chosen.shared,
        made_at=datetime.now(UTC).replace(tzinfo=None),
        progress=_progress(),
    )
    _say(f"wrote {chosen.out}")


def _verify(chosen: argparse.Namespace) -> int:
    from engine.physics.published import verify_lines
    from engine.physics.validation import results, strict_agreement

    lines = verify_lines()
    for line in lines:
        print(line.text)
    out = sum(not line.ok for line in lines)
    print(f"\n{len(lines) - out} of {len(lines)} published values agree\n")
    print("Bench results beside the estimate (calibration rows were fitted):")
    for result in results():
        print(_bench_line(result))
    found = strict_agreement()
    print(
        f"\nNever fitted, condition known: {found.inside} of {found.rows} inside the "
        f"band; rms error {found.rms_logit:.2f} on the logit scale, bias "
        f"{found.bias_logit:+.2f}; published orders {found.right} right, "
        f"{found.wrong} wrong of {found.pairs}"
    )
    return FAULT if out else DONE


def _bench_line(result: Result) -> str:
    row = result.row
    head = f"{row.kind:<12} {row.study:<15} {row.condition[:60]:<60}"
    if result.is_inside is None:
        return (
            f"{head} observed {row.observed_frac:6.1%}   no estimate: {result.why_not}"
        )
    inside = "inside" if result.is_inside else "OUTSIDE"
    return (
        f"{head} observed {row.observed_frac:6.1%}   estimate {result.estimate:6.1%} "
        f"({result.low:.1%} to {result.high:.1%})   {inside}"
    )


def _journal(chosen: argparse.Namespace) -> None:
    from engine.journal import open_journal

    if not os.path.exists(chosen.file):
        raise UnknownId(f"there is no journal {chosen.file}")
    journal = open_journal(chosen.file)
    journal.check()
    count = len(list(journal.entries()))
    print(f"{chosen.file}: {count} entries, the chain holds; head {journal.head}")


def _scenario(name_or_path: str | None):
    if name_or_path is None:
        return None
    from engine.reviews.scenario import find_scenario

    return find_scenario(name_or_path)


def _progress() -> Callable[[float, str], None] | None:
    """A moving line on a terminal, silence in a pipe."""
    if not sys.stderr.isatty():
        return None

    def show(share: float, what: str) -> None:
        end = "\n" if share >= 1 else ""
        print(f"\r{share:4.0%}  {what:<50}", end=end, file=sys.stderr, flush=True)

    return show


def _say(line: str) -> None:
    print(line)


if __name__ == "__main__":
    sys.exit(main())
