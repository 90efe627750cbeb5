"""Everything drawn: inline SVG and the HTML it stands in. Nothing here computes."""
