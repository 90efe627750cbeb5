"""Ink on paper: the palette, and the few rules of style that every screen shares."""

from __future__ import annotations

import streamlit as st

from reviewapp.drawings.svg import DARK, LIGHT, Colours

# What Streamlit is told of the palette, by mode; option names are its own.
OPTIONS: dict[str, Colours] = {"light": LIGHT, "dark": DARK}


def is_dark() -> bool:
    """Whether the reader's browser shows the dark page."""
    try:
        return st.context.theme.type == "dark"
    except AttributeError:
        return False


def colours() -> Colours:
    """The palette of the page as it is shown."""
    return DARK if is_dark() else LIGHT


# A dark page would spend a cartridge: on paper its light and dark change places.
_LIGHT_PRINT = "html { filter: invert(1) hue-rotate(180deg); background: #000; }"


def css() -> str:
    """Style shared by every screen: a readable measure, quiet tables, print."""
    shown = colours()
    return f"""<style>
.stMain .block-container {{ max-width: 1240px; padding: 2.2rem 2.4rem 4rem; }}
[data-testid="stSidebar"] {{ min-width: 240px; max-width: 240px; }}
.stMain h1 {{ font-size: 1.9rem; padding: 0.4rem 0 0.2rem; }}
h1, h2, h3 {{ letter-spacing: -0.01em; }}
.stMain p.opening {{ font-size: 1.2rem; line-height: 1.5; max-width: 62rem;
  margin: 0.2rem 0 0.4rem; }}
.stMain p.caution {{ font-size: 0.84rem; color: {shown["faint"]}; max-width: 62rem;
  border-left: 3px solid {shown["fired"]}; padding-left: 0.7rem; margin: 0 0 0.6rem; }}
[data-testid="stCaptionContainer"], [data-testid="stCaptionContainer"] p {{
  color: {shown["faint"]}; opacity: 1; }}
.nothing {{ border: 1px dashed {shown["unknown"]}; border-radius: 6px;
  padding: 0.9rem 1.1rem; margin: 0.6rem 0; }}
.nothing b {{ display: block; margin-bottom: 0.2rem; }}
.stMarkdown table {{ font-variant-numeric: tabular-nums; font-size: 0.9rem; }}
.stMarkdown svg:focus-visible, .stMarkdown svg [tabindex]:focus-visible {{
  outline: 2px solid {shown["aerosol"]}; outline-offset: 2px; }}
.answers td {{ padding: 0.15rem 0.6rem 0.15rem 0; vertical-align: top; }}
@media print {{
  {_LIGHT_PRINT if is_dark() else ""}
  [data-testid="stSidebar"], [data-testid="stHeader"], [data-testid="stToolbar"],
  .stButton, .stDownloadButton {{ display: none !important; }}
  .block-container {{ max-width: none; padding: 0; }}
}}
</style>"""
