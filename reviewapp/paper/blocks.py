"""The HTML of a report, which is always our own, as blocks that any paper can set.

A block is a mapping with ``kind``: ``text`` (runs), ``head``, ``list`` (items), ``row``
(cells side by side), ``table`` (heads, rows) or ``drawing`` (svg, words, px). What is
closed in the table of indicators stays closed; everything else is opened.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from html.parser import HTMLParser
from typing import Any

Block = dict[str, Any]

_VOID = {"br", "meta", "link", "hr", "img", "input", "wbr"}
_LEFT_OUT = {"style", "script", "head", "title"}
_STRONG = {"b", "strong", "summary"}
_HEADS = {"h2": 2, "h3": 3, "h4": 4}
_INDICATORS = ("m-table",)


@dataclass
class _Node:
    tag: str
    attributes: dict[str, str]
    children: list[_Node | str] = field(default_factory=list)

    @property
    def classes(self) -> list[str]:
        return self.attributes.get("class", "").split()

    @property
    def nodes(self) -> list[_Node]:
        return [each for each in self.children if isinstance(each, _Node)]


class _Reader(HTMLParser):
    """A tree of nodes; drawings are kept as they were written."""

    def __init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self.root = _Node("body", {})
        self._open = [self.root]
        self._drawing: list[str] = []

    def handle_starttag(
        self, tag: str, attrs: list[tuple[str, str | None]], closed: bool = False
    ) -> None:
        if self._drawing or tag == "svg":
            self._drawing.append(self.get_starttag_text() or "")
            if tag == "svg" and len(self._drawing) == 1:
                self._add(_Node("svg", {k: v or "" for k, v in attrs}))
            return
        node = _Node(tag, {k: v or "" for k, v in attrs})
        self._open[-1].children.append(node)
        if tag not in _VOID and not closed:
            self._open.append(node)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.handle_starttag(tag, attrs, closed=True)

    def handle_endtag(self, tag: str) -> None:
        if self._drawing:
            self._drawing.append(f"</{_CASED.get(tag, tag)}>")
            if tag == "svg":
                drawn = self._open[-1].nodes[-1]
                drawn.children = ["".join(self._drawing)]
                self._drawing = []
            return
        while len(self._open) > 1:
            if self._open.pop().tag == tag:
                return

    def handle_data(self, data: str) -> None:
        if self._drawing:
            self._drawing.append(_escaped(data))
        else:
            self._open[-1].children.append(data)

    def _add(self, node: _Node) -> None:
        self._open[-1].children.append(node)


# Tags of a drawing whose capitals count; the reader hands them over in small letters.
_CASED = {
    name.lower(): name for name in ("linearGradient", "radialGradient", "clipPath")
}


def _escaped(words: str) -> str:
    return words.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")


def blocks_of(html: str) -> list[Block]:
    """The blocks of a piece of a report, in reading order."""
    reader = _Reader()
    reader.feed(html)
    reader.close()
    return _blocks(reader.root)


def tables_of(html: str) -> list[Block]:
    """Only the tables, wherever they stand."""
    return [each for each in _walk(blocks_of(html)) if each["kind"] == "table"]


def words_in(cell: list[Block]) -> str:
    """A cell as one line of words; a drawing says what it says to a screen reader."""
    said = []
    for block in cell:
        if block["kind"] == "text":
            said.append("".join(run["words"] for run in block["runs"]))
        elif block["kind"] == "drawing":
            said.append(block["words"])
    return re.sub(r"\s+", " ", " ".join(said)).strip()


def _walk(blocks: list[Block]) -> list[Block]:
    found = []
    for block in blocks:
        found.append(block)
        for cell in block.get("cells", []):
            found += _walk(cell)
    return found


def _blocks(node: _Node) -> list[Block]:
    made: list[Block] = []
    runs: list[dict[str, Any]] = []

    def close() -> None:
        said = _tidy(runs)
        if said:
            made.append({"kind": "text", "runs": said})
        runs.clear()

    for child in node.children:
        if isinstance(child, str) or _is_inline(child):
            runs.extend(_runs(child))
            continue
        close()
        made += _block(child)
    close()
    return made


def _is_inline(node: _Node) -> bool:
    if node.tag == "span":
        return not any(each.tag == "svg" for each in node.nodes)
    return node.tag in {"b", "strong", "small", "em", "i", "a", "br", "code", "sup"}


def _block(node: _Node) -> list[Block]:
    if node.tag in _LEFT_OUT:
        return []
    if node.tag in _HEADS:
        words = words_in(_blocks(_Node("div", {}, node.children)))
        return [{"kind": "head", "level": _HEADS[node.tag], "words": words}]
    if node.tag == "svg":
        return [_drawing(node)]
    if node.tag in {"ul", "ol"}:
        items = [_blocks(each) for each in node.nodes if each.tag == "li"]
        return [{"kind": "list", "items": items}] if items else []
    if node.tag == "table":
        return [_table(node)]
    if any(name in node.classes for name in _INDICATORS):
        return _indicators(node)
    side = _side_by_side(node)
    if side > 1 and len(node.nodes) > 1:
        cells = [_blocks(_Node("div", {}, [each])) for each in node.nodes]
        return [{"kind": "row", "across": side, "cells": cells}]
    if node.tag == "summary":
        strong = {"words": words_in(_blocks(_Node("div", {}, node.children)))}
        return [{"kind": "text", "runs": [{**strong, "strong": True, "small": False}]}]
    return _blocks(node)


def _side_by_side(node: _Node) -> int:
    style = node.attributes.get("style", "").replace(" ", "")
    repeated = re.search(r"grid-template-columns:repeat\((\d+)", style)
    if repeated:
        return int(repeated[1])
    if "display:flex" in style or "m-two" in node.classes:
        return 2
    return 1


def _drawing(node: _Node) -> Block:
    svg = str(node.children[0])
    if "xmlns=" not in svg.split(">", 1)[0]:
        svg = svg.replace("<svg", '<svg xmlns="http://www.w3.org/2000/svg"', 1)
    box = node.attributes.get("viewbox", "0 0 100 100").split()
    return {
        "kind": "drawing",
        "svg": svg,
        "words": node.attributes.get("aria-label", "") or "drawing",
        "px": float(box[2]),
    }


def _table(node: _Node) -> Block:
    lines = [each for part in node.nodes for each in ([part, *part.nodes])]
    rows = [each for each in lines if each.tag == "tr"]
    heads: list[list[Block]] = []
    body: list[list[list[Block]]] = []
    right: list[bool] = []
    for row in rows:
        cells = [each for each in row.nodes if each.tag in {"td", "th"}]
        filled = [_blocks(each) for each in cells]
        if not heads and cells and all(each.tag == "th" for each in cells):
            heads = filled
            right = [_is_right(each) for each in cells]
        else:
            body.append(filled)
            right = right or [_is_right(each) for each in cells]
    return {"kind": "table", "heads": heads, "rows": body, "right": right, "parts": []}


def _is_right(node: _Node) -> bool:
    return "right" in node.attributes.get("style", "")


# Parts of the width, as the table of indicators is drawn on screen.
_INDICATOR_PARTS = [1.75, 0.95, 1.15, 0.8, 0.85, 1.5]


def _indicators(node: _Node) -> list[Block]:
    """The rows that stand closed as one table; what stands open follows its row."""
    heads: list[list[Block]] = []
    rows: list[Any] = []
    after: list[Block] = []
    for each in node.nodes:
        if "m-head" in each.classes:
            heads = [_blocks(_Node("div", {}, [cell])) for cell in each.nodes]
        elif "m-group" in each.classes:
            rows.append({"group": words_in(_blocks(each))})
        elif each.tag == "details":
            row = each.nodes[0].nodes[0]
            rows.append([_blocks(_Node("div", {}, [cell])) for cell in row.nodes])
            if "open" in each.attributes:
                after += [b for part in each.nodes[1:] for b in _blocks(part)]
    right = [False, True, False, True, False, False]
    heads = heads or [[{"kind": "text", "runs": [_run(w)]}] for w in _HEAD_WORDS]
    table = {"kind": "table", "heads": heads, "rows": rows, "right": right}
    return [{**table, "parts": _INDICATOR_PARTS}, *after]


_HEAD_WORDS = (
    "Indicator",
    "Figure",
    "Of all treatments",
    "Known",
    "Months",
    "Since the month before",
)


def _run(words: str, strong: bool = False, small: bool = False) -> dict[str, Any]:
    return {"words": words, "strong": strong, "small": small}


def _runs(
    node: _Node | str, strong: bool = False, small: bool = False
) -> list[dict[str, Any]]:
    if isinstance(node, str):
        return [_run(re.sub(r"\s+", " ", node), strong, small)]
    if node.tag == "br":
        return [_run("\n")]
    strong, small = strong or node.tag in _STRONG, small or node.tag == "small"
    return [run for each in node.children for run in _runs(each, strong, small)]


def _tidy(runs: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Runs without empty ones at either end."""
    kept = [dict(run) for run in runs if run["words"]]
    while kept and not kept[0]["words"].strip():
        kept.pop(0)
    while kept and not kept[-1]["words"].strip():
        kept.pop()
    return kept
