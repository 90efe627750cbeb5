"""What the README tells a newcomer to type is what the gate runs."""

import re
from pathlib import Path

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text("utf-8")


def test_the_gate_runs_exactly_the_test_command_of_the_readme():
    commands = re.findall(r"```\n(.*?)\n```", README, re.DOTALL)
    test_command = next(c for c in commands if c.endswith("pytest"))
    assert test_command in (ROOT / ".ci" / "run").read_text("utf-8").splitlines()


def test_the_job_the_cautions_and_the_picture_are_there():
    assert "Findings need clinical confirmation" in README
    assert "licensed practice decide" in README
    assert "![" in README
    for picture in re.findall(r"!\[[^\]]+\]\(([^)]+)\)", README):
        assert (ROOT / picture).exists(), picture
