"""Reports as one self-contained page: no script, no outside file, ready to print."""

from __future__ import annotations

import unicodedata
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from html import escape

import pandas as pd

from engine.replay import Replay
from reviewapp.drawings.svg import LIGHT

CONFIDENTIAL = (
    "CONFIDENTIAL - quality review. May be protected under local law. Do not copy, "
    "file in the medical record or forward."
)
CAUTION = (
    "Findings need clinical confirmation; unconfirmed ones are flags. Estimates come "
    "from bench-based methods. Local policy and licensed practice decide. Setups are "
    "judged, never people; nothing here is advice for a current patient."
)

Sections = Sequence[tuple[str, str]]


@dataclass(frozen=True, kw_only=True)
class Report:
    """What is written to a file, whatever its kind.

    ``name``      of the file, without an ending
    ``sections``  heading and HTML, in the order they are read
    ``tables``    the figures behind it, whole, by the name of their sheet
    """

    name: str
    title: str
    sections: Sections
    tables: Mapping[str, pd.DataFrame]


@dataclass(frozen=True, kw_only=True)
class Banner:
    """What every page says of where its figures come from."""

    log_name: str
    log_fingerprint: str
    policy: str
    policy_hash: str
    engine_version: str
    treatments: int
    rows_in: int
    rows_used: int
    rows_refused: int
    made_at: str
    journal_head: str
    scenario: str = ""

    @property
    def lines(self) -> tuple[str, ...]:
        """The stamp in words."""
        scenario = f", scenario {self.scenario}" if self.scenario else ""
        return (
            f"Log {self.log_name} ({self.log_fingerprint}): {self.treatments:,} "
            f"treatments replayed; rows in {self.rows_in:,} = used "
            f"{self.rows_used:,} + refused {self.rows_refused:,}.",
            f"Policy {self.policy} ({self.policy_hash}){scenario}. Engine "
            f"{self.engine_version}. Journal {self.journal_head}. "
            f"Made {self.made_at} UTC.",
        )


def banner_of(
    replay: Replay, log_name: str, made_at: datetime, journal_head: str
) -> Banner:
    """The banner of a replay; the moment comes from the caller."""
    stamp = replay.stamp
    return Banner(
        log_name=log_name,
        log_fingerprint=stamp["log_fingerprint"],
        policy=stamp["policy_name"],
        policy_hash=stamp["policy_hash"],
        engine_version=stamp["engine_version"],
        treatments=stamp["treatments"],
        rows_in=stamp["rows_in"],
        rows_used=stamp["rows_used"],
        rows_refused=stamp["rows_refused"],
        made_at=f"{made_at:%Y-%m-%d %H:%M}",
        journal_head=journal_head[:12] or "empty",
        scenario=stamp["scenario"] or "",
    )


def printable(words: str) -> str:
    """Words without characters that no page may hold: controls, halves of pairs."""
    return "".join(
        c
        if c in "\n\t" or unicodedata.category(c) not in {"Cc", "Cs", "Cn"}
        else "\ufffd"
        for c in words
    )


def page(title: str, banner: Banner, sections: Sections) -> str:
    """The whole page; section bodies are HTML already, titles are not."""
    body = "".join(
        f"<section><h2>{escape(head)}</h2>{inside}</section>"
        for head, inside in sections
    )
    stamp = "".join(f"<p>{escape(line)}</p>" for line in banner.lines)
    return printable(
        '<!doctype html><html lang="en"><head><meta charset="utf-8">'
        '<meta name="viewport" content="width=device-width, initial-scale=1">'
        f"<title>{escape(title)}</title><style>{_CSS}</style></head><body>"
        f'<header><p class="confidential">{escape(CONFIDENTIAL)}</p>'
        f"<h1>{escape(title)}</h1>"
        f'<p class="caution">{escape(CAUTION)}</p></header>'
        f"<main>{body}{_SIGNATURES}</main><footer>{stamp}</footer></body></html>"
    )


_SIGNATURES = (
    '<section class="signatures"><h2>Read and signed</h2><table><thead><tr>'
    '<th scope="col">Role</th><th scope="col">Signature</th>'
    '<th scope="col">Date</th></tr></thead><tbody>'
    + "<tr><td>&nbsp;</td><td></td><td></td></tr>" * 3
    + "</tbody></table></section>"
)

_CSS = f"""
@page {{ size: A4; margin: 16mm 15mm 20mm;
  @bottom-left {{ content: "Findings need clinical confirmation"; font-size: 8pt; }}
  @bottom-right {{ content: counter(page) " / " counter(pages); font-size: 8pt; }} }}
:root {{ color-scheme: light; }}
body {{ font: 11pt/1.45 system-ui, -apple-system, "Segoe UI", sans-serif;
  color: {LIGHT["ink"]}; background: #fff; max-width: 190mm; margin: 0 auto;
  padding: 8mm; }}
h1 {{ font-size: 20pt; margin: 0 0 2mm; letter-spacing: -.01em; }}
h2 {{ font-size: 13pt; margin: 8mm 0 2mm; break-after: avoid; }}
h3 {{ font-size: 11pt; margin: 4mm 0 1mm; break-after: avoid; }}
.confidential {{ font-size: 8.5pt; color: {LIGHT["fired"]}; font-weight: 600; }}
.caution {{ font-size: 9pt; color: {LIGHT["faint"]};
  border-left: 3px solid {LIGHT["fired"]}; padding-left: 3mm; }}
table {{ border-collapse: collapse; width: 100%; font-size: 9pt; margin: 2mm 0; }}
thead {{ display: table-header-group; }}
tr, figure, svg {{ break-inside: avoid; }}
th {{ text-align: left; border-bottom: 1.2px solid {LIGHT["ink"]};
  padding: 1mm 2mm 1mm 0; vertical-align: bottom; }}
td {{ border-bottom: .5px solid {LIGHT["lost"]}; padding: 1mm 2mm 1mm 0;
  vertical-align: top; overflow-wrap: anywhere; }}
svg {{ max-width: 100%; height: auto; }}
.signatures td {{ height: 10mm; }}
footer {{ margin-top: 8mm; font-size: 8pt; color: {LIGHT["faint"]};
  border-top: .5px solid {LIGHT["lost"]}; }}
@media print {{ body {{ padding: 0; max-width: none; }}
  details > *:not(summary) {{ display: block; }} }}
"""
