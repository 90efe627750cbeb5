"""The fit can be run again by anyone and gives the constants that are shipped."""

import ast
from pathlib import Path

import numpy as np
import pytest

from engine.evidence import calibration
from engine.physics import calibrate
from engine.physics.calibrate import (
    FREE,
    calibration_rows,
    data_of,
    evidence_text,
    fitted,
    left_out_errors,
    spread_of,
    within_of,
)
from engine.physics.constants import FITTED

# The optimiser stops on its own tolerance, and four digits are written down.
STEP_OF_THE_FIT = 0.01


@pytest.fixture(scope="module")
def again():
    data = data_of(calibration_rows())
    return data, fitted(data)


def test_the_fit_gives_the_shipped_constants_again(again):
    _, found = again
    for field in FREE:
        assert getattr(found.constants, field) == pytest.approx(
            getattr(FITTED, field), rel=STEP_OF_THE_FIT
        ), field


def test_the_fit_starts_anywhere(again):
    """Priors are where it starts, whatever constants are handed in."""
    data, found = again
    moved = {field: getattr(FITTED, field) * 0.8 for field in FREE}
    other = fitted(data, type(FITTED)(**{**vars(FITTED), **moved}))
    for field in FREE:
        assert getattr(other.constants, field) == pytest.approx(
            getattr(found.constants, field), rel=STEP_OF_THE_FIT
        )


def test_the_shipped_spread_is_that_of_studies_left_out(again):
    data, found = again
    left_out = spread_of(left_out_errors(calibration_rows()))
    assert float(calibration.DELIVERED_SPREAD_LOGIT) == pytest.approx(
        left_out, rel=STEP_OF_THE_FIT
    )
    assert float(calibration.WITHIN_STUDY_LOGIT) == pytest.approx(
        within_of(data, found), rel=0.02
    )


def test_every_free_constant_lies_in_its_own_range():
    for name, _, _ in FREE.values():
        number = getattr(calibration, name)
        assert number.low < number.value < number.high
        assert number.known == "fitted"


def test_what_is_written_is_what_was_fitted(again):
    _, found = again
    text = evidence_text(found, spread=0.5, within=0.2)
    names = {
        node.targets[0].id
        for node in ast.parse(text).body
        if isinstance(node, ast.Assign)
    }
    shipped = Path(calibration.__file__).read_text("utf-8")
    assert names == {
        node.targets[0].id
        for node in ast.parse(shipped).body
        if isinstance(node, ast.Assign)
    }


def test_the_fit_never_opens_the_validation_room():
    tree = ast.parse(Path(calibrate.__file__).read_text("utf-8"))
    modules = {
        node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)
    }
    assert "engine.physics.validation" not in modules
    assert all(row.kind == "calibration" for row in calibration_rows())
    assert np.isfinite(data_of(calibration_rows()).observed_logit).all()
