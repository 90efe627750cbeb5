"""A report as a tagged PDF (PDF/UA-1), set without a browser."""

from __future__ import annotations

import json
import unicodedata
from dataclasses import replace
from importlib import resources
from typing import Any

from engine.errors import SourceUnreadable
from reviewapp.drawings.svg import FONT
from reviewapp.paper.blocks import Block, blocks_of, words_in
from reviewapp.report import CAUTION, CONFIDENTIAL, Banner, Sections, printable

NOT_INSTALLED = (
    "a PDF needs the extra package: install aerosol-treatment-review[pdf], or write"
    " .html and print that page"
)
_FONTS = "Noto Sans, Liberation Sans, DejaVu Sans, Libertinus Serif"
_LONGEST_WORDS = 34  # of a cell, as far as its column's width is concerned
_SHORTEST_WORDS = 7
_NARROW = 16  # a column no cell of which is wider keeps to the width it needs


def is_installed() -> bool:
    """Whether a PDF can be made here."""
    try:
        import typst  # noqa: F401
    except ImportError:
        return False
    return True


def pdf(title: str, banner: Banner, sections: Sections) -> bytes:
    """The whole document.

    Raises   SourceUnreadable if its words cannot be set; ImportError where the extra
             package is not installed (ask ``is_installed`` first).
    """
    import typst

    try:
        return _compiled(title, banner, sections)
    except typst.TypstError:
        # A letter no font here has: a PDF for screen readers may not hold it.
        plain = [(_in_fonts(head), _in_fonts(body)) for head, body in sections]
        named = replace(banner, log_name=_in_fonts(banner.log_name))
    try:
        return _compiled(_in_fonts(title), named, plain)
    except typst.TypstError as problem:
        raise SourceUnreadable(
            f"the PDF cannot be set: {problem}; write .html and print that page"
        ) from None


def _in_fonts(words: str) -> str:
    """Letters outside the scripts every font has become a question mark."""
    composed = unicodedata.normalize("NFC", words)
    return "".join(c if ord(c) < 0x250 or c in _OURS else "?" for c in composed)


_OURS = "–—‘’“”…·•µμ×−≥≤≈±°□■●◐○▸→σφκΔ\u202f\u2009"


def _compiled(title: str, banner: Banner, sections: Sections) -> bytes:
    import typst

    title = printable(title)
    page = {
        "title": title,
        "confidential": CONFIDENTIAL,
        "caution": CAUTION,
        "footer": f"{title}. Findings need clinical confirmation. Engine "
        f"{banner.engine_version}, made {banner.made_at} UTC.",
        "stamp": [printable(line) for line in banner.lines],
        "narrow": _NARROW,
        "sections": [
            {
                "head": printable(head),
                "blocks": [_set(each) for each in blocks_of(printable(body))],
            }
            for head, body in sections
        ],
    }
    template = resources.files("reviewapp.paper").joinpath("report.typ").read_bytes()
    made: Any = typst.compile(
        template,
        format="pdf",
        sys_inputs={"page": json.dumps(page)},
        pdf_standards="ua-1",
    )
    return bytes(made)


def _set(block: Block) -> Block:
    """The block with what the template asks: fonts it can find, widths of columns."""
    kind = block["kind"]
    if kind == "drawing":
        svg = block["svg"].replace(FONT.replace("'", "&#x27;"), _FONTS)
        return {**block, "svg": svg}
    if kind == "list":
        return {**block, "items": [[_set(b) for b in item] for item in block["items"]]}
    if kind == "row":
        return {**block, "cells": [[_set(b) for b in cell] for cell in block["cells"]]}
    if kind == "table":
        return _set_table(block)
    return block


def _set_table(block: Block) -> Block:
    heads = [[_set(b) for b in cell] for cell in block["heads"]]
    rows = [
        row if isinstance(row, dict) else [[_set(b) for b in cell] for cell in row]
        for row in block["rows"]
    ]
    listed = [heads, *(row for row in rows if isinstance(row, list))]
    widths = [
        max(_width(row[i]) for row in listed if i < len(row)) for i in range(len(heads))
    ]
    parts = block["parts"] or widths
    shares = [part / sum(parts) for part in parts]
    return {**block, "heads": heads, "rows": rows, "widths": widths, "shares": shares}


def _width(cell: list[Block]) -> float:
    """About how wide a column must be for this cell, in characters."""
    if any(block["kind"] == "drawing" for block in cell):
        return float(_LONGEST_WORDS)
    said = words_in(cell)
    longest = max((len(word) for word in said.split()), default=0)
    return float(max(_SHORTEST_WORDS, longest, min(len(said), _LONGEST_WORDS)))
