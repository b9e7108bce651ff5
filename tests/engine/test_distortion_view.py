"""What the page shows of distortion is what `distortion` says, at every law, amplitude and frequency."""

import numpy as np
import pytest

import engine
from engine.design import Design
from engine.distortion_view import amplitude_series, distortion_map, distortion_view
from engine.errors import Stopped

BAND = (40.0, 2e3)


def test_both_laws_over_the_band():
    view = distortion_view(Design(), BAND, 5)
    assert set(view.found) == {"sine", "square-root"} and not view.faults
    for law, found in view.found.items():
        alone = engine.distortion(Design().with_values({"drive.law": law}), found.frequency)
        np.testing.assert_allclose(found.thd, alone.thd, rtol=1e-9)
        assert found.frequency[0] == BAND[0] and found.frequency[-1] == pytest.approx(BAND[1])


def test_a_law_that_cannot_be_driven_is_said_and_the_other_is_there():
    """The square-root law needs an amplitude of at most half the bias (the square root's own domain)."""
    view = distortion_view(Design().with_values({"drive.bias": 600.0, "drive.amplitude": 500.0}), BAND, 3)
    assert set(view.found) == {"sine"} and "half" in view.faults["square-root"]


def test_thd_grows_with_amplitude_and_the_series_end_where_the_law_does():
    """Common practice: distortion grows with level. Second harmonic of the square law: v/4V0 (checks of the drive)."""
    design = Design().with_values({"drive.bias": 1000.0, "drive.amplitude": 300.0})
    series = amplitude_series(design, 120.0, 6)
    assert all(np.all(np.diff(series.thd["sine"]) > 0) for _ in [0])
    assert series.amplitude["sine"][-1] == pytest.approx(600.0) and series.faults["sine"] == ""
    assert series.amplitude["square-root"][-1] == pytest.approx(500.0) and "half the bias" in series.faults["square-root"]


def test_a_silent_drive_has_no_series():
    series = amplitude_series(Design().with_values({"drive.amplitude": 0.0}), 120.0, 4)
    assert len(series.thd["sine"]) == 0 and "zero" in series.faults["sine"]


def test_the_map_is_the_curves_one_above_the_other():
    told = []
    design = Design()
    found = distortion_map(design, BAND, 4, 3, told.append)
    assert found.finished and found.thd.shape == (3, 4) and told == pytest.approx([1/3, 2/3, 1])
    row = engine.distortion(design, found.frequency, amplitude=found.amplitude[1])
    np.testing.assert_allclose(found.thd[1], row.thd, rtol=1e-9)


def test_a_map_stopped_keeps_what_is_done():
    told = []
    found = distortion_map(Design(), BAND, 4, 3, told.append, lambda: len(told) == 1)
    assert not found.finished and np.isfinite(found.thd[0]).all() and np.isnan(found.thd[1:]).all()
    with pytest.raises(Stopped):
        distortion_map(Design(), BAND, 4, 3, stop=lambda: True)
