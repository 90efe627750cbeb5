"""Every work cited, once."""

from engine.evidence.shape import Source

COMMON_PRACTICE = Source(
    key="COMMON_PRACTICE",
    authors="the trade",
    year=None,
    title="Common practice of respiratory care, no source",
    known="common practice",
)
OURS = Source(
    key="OURS",
    authors="this project",
    year=None,
    title="A choice made for this project; change it in the policy or say why not",
    known="ours",
)
