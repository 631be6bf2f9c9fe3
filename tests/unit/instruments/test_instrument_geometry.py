"""Where beams and cells lie, and which instruments are refused."""

from __future__ import annotations

import numpy as np
import pytest
from pydantic import ValidationError

from lespost.errors import DataError
from lespost.instruments.doppler_profiler import beam_volumes
from lespost.instruments.geometry import Beams, axis_tilt, beam_directions, place_beams
from lespost.instruments.platform import moored_positions
from lespost.instruments.settings import InstrumentSettings
from lespost.instruments.transforms import map_to_heights


def settings(**changes: object) -> InstrumentSettings:
    return InstrumentSettings.model_validate({"name": "mooring", "depth": "40 m", **changes})


def place(width: float = 1000.0, bottom: float = -80.0, **changes: object) -> Beams:
    return place_beams(settings(**changes), 0.0, bottom, width)


def test_directions_without_tilt_and_with_heading() -> None:
    s, c = np.sin(np.radians(20.0)), np.cos(np.radians(20.0))
    np.testing.assert_allclose(beam_directions(20.0), [[s, 0, c], [-s, 0, c], [0, s, c], [0, -s, c]], atol=1e-15)
    np.testing.assert_allclose(beam_directions(20.0, heading=90.0), [[0, s, c], [0, -s, c], [-s, 0, c], [s, 0, c]], atol=1e-15)
    np.testing.assert_allclose(beam_directions(20.0, upward=False)[:, 2], -c)


@pytest.mark.parametrize("upward", [True, False])
def test_pitch_tips_the_axis_to_the_heading_and_roll_to_its_left(upward: bool) -> None:
    heading = np.array([np.cos(0.5), np.sin(0.5), 0.0])
    left = np.array([-np.sin(0.5), np.cos(0.5), 0.0])
    pitched = beam_directions(20.0, np.degrees(0.5), 10.0, 0.0, upward).mean(axis=0)
    rolled = beam_directions(20.0, np.degrees(0.5), 0.0, 10.0, upward).mean(axis=0)
    assert pitched @ heading / np.linalg.norm(pitched) == pytest.approx(np.sin(np.radians(10.0)))
    assert pitched @ left == pytest.approx(0.0, abs=1e-12)
    assert rolled @ left / np.linalg.norm(rolled) == pytest.approx(np.sin(np.radians(10.0)))
    assert rolled @ heading == pytest.approx(0.0, abs=1e-12)
    assert axis_tilt(3.0, 4.0) == pytest.approx(5.0, abs=0.01)


def test_first_cell_and_cell_spacing() -> None:
    # centre of the first cell: blanking distance + (pulse + cell)/2; both vertical lengths of a level instrument
    beams = place(blank=2.0, cell_length=1.0, pulse_length=2.0)
    assert beams.depths[0] == pytest.approx(40.0 - 3.5)
    np.testing.assert_allclose(np.diff(beams.depths), -1.0)
    np.testing.assert_allclose(beams.ranges * np.cos(np.radians(20.0)), beams.heights)


def test_automatic_cells_stay_clear_of_the_side_lobes_and_explicit_ones_are_flagged() -> None:
    # 40 m, 20 degrees, 1 m: side lobes spoil the upper 3.912 m (Lentz et al. 2022)
    automatic = place()
    assert automatic.depths[-1] >= 3.912 > automatic.depths[-1] - 1.0
    assert not automatic.contaminated.any()
    explicit = place(cells=38)
    np.testing.assert_array_equal(explicit.contaminated, explicit.depths < 3.912)
    without = place(side_lobes=False)
    assert without.depths[-1] < 3.0  # up to the cell that just does not touch the surface
    assert without.depths[-1] >= 1.0
    assert not place(cells=38, side_lobes=False).contaminated.any()


def test_tilt_widens_the_side_lobes() -> None:
    assert place(pitch=5.0).depths[-1] > place().depths[-1]


def test_looking_down() -> None:
    beams = place(depth=10.0, looking="down", bottom=-60.0)
    assert beams.depths[0] == pytest.approx(12.0)
    assert np.all(beams.heights < 0)
    assert 60.0 - beams.depths[-1] >= 50.0 * (1 - np.cos(np.radians(20.0))) + 1.5


def test_a_head_outside_the_water_is_refused() -> None:
    with pytest.raises(DataError, match=r"mooring.*40 m.*0 to 30 m"):
        place(bottom=-30.0)


def test_no_room_for_a_cell_is_refused() -> None:
    with pytest.raises(DataError, match="no cell"):
        place(depth=3.0, blank=2.0)


def test_beams_wider_than_the_periodic_domain_are_refused_or_labelled() -> None:
    with pytest.raises(DataError, match=r"26 m apart.*20 m wide.*twice"):
        place(width=20.0)
    assert place(width=20.0, repeated_water="label").spread > 20.0
    assert place(width=40.0).spread == pytest.approx(2 * 35.0 * np.tan(np.radians(20.0)), rel=0.05)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"averaging_interval": 0.5}, "at least one ping"),
        ({"position": (1.0, 2.0), "deployments": 9}, "either position"),
        ({"beam_azimuths": (0.0, 180.0, 90.0, 95.0)}, "within 10 degrees"),
        ({"name": "../evil"}, "String should match pattern"),
        ({"depth": "40 s"}, "unit"),
        ({"beam_angel": 20.0}, "Extra inputs"),
        ({"noise": float("nan")}, "finite"),
    ],
)
def test_impossible_settings_are_refused(changes: dict[str, object], words: str) -> None:
    with pytest.raises(ValidationError, match=words):
        settings(**changes)


def test_volumes_lie_along_the_beams_and_stop_at_the_surface() -> None:
    asked = settings(cells=38, beam_width=2.0)
    beams = place_beams(asked, 0.0, -80.0, 1000.0)
    volumes = beam_volumes(beams, asked, 0.0, -80.0)
    assert volumes.z.max() <= 0.0
    np.testing.assert_allclose(np.bincount(volumes.owner, volumes.weights), 1.0, atol=1e-12)
    assert np.all(np.diff(volumes.owner) >= 0)
    inner = beam_volumes(place_beams(asked, 0.0, -80.0, 1000.0), asked)
    for axis, offset in (("x", 0.0), ("y", 0.0), ("z", -40.0)):
        centres = np.bincount(inner.owner, inner.weights * getattr(inner, axis))
        column = "xyz".index(axis)
        expected = (beams.ranges[:, None] * beams.directions[None, :, column]).ravel() + offset
        np.testing.assert_allclose(centres, expected, atol=1e-9)


def test_bin_mapping_restores_a_shear_seen_by_a_tilted_instrument() -> None:
    """At 40 m range cosine 20 and a tilt of 5 degrees the cells of opposing beams lie at 36.25 and 38.64 m (arithmetic)."""
    directions = beam_directions(20.0, pitch=5.0)
    ranges = np.arange(2.0, 60.0)
    assert (40.0 * directions[:2, 2]).tolist() == pytest.approx([36.25, 38.64], abs=0.01)
    heights = ranges * np.cos(np.radians(20.0))
    beams = np.stack([directions[b, 0] * 0.01 * ranges * directions[b, 2] for b in range(4)], axis=-1)  # u = 0.01 z
    solved = np.linalg.pinv(directions)
    without = beams @ solved.T
    mapped = map_to_heights(beams, ranges, directions, heights) @ solved.T
    good = np.isfinite(mapped[:, 0])
    assert good[1:-4].all()
    # a beam that leans away never reaches the highest cells, one that stands up starts above the lowest
    assert not good[-1]
    assert not good[0]
    np.testing.assert_allclose(mapped[good], np.stack([0.01 * heights, 0 * heights, 0 * heights], axis=-1)[good], atol=1e-12)
    assert np.abs(without[good, 2]).max() > 1e-3  # unmapped, the shear leaks into w


def test_deployments_cover_the_domain_evenly() -> None:
    for count in (1, 7, 16, 100):
        places = moored_positions(settings(deployments=count), (300.0, 200.0), np.random.default_rng(1))
        assert places.shape == (count, 2)
        assert np.all((places >= 0) & (places <= [300.0, 200.0]))
    # stratified: each quadrant of 100 holds close to a quarter
    quadrants = np.bincount((places[:, 0] > 150.0) * 2 + (places[:, 1] > 100.0), minlength=4)
    assert np.abs(quadrants - 25).max() <= 6
    np.testing.assert_array_equal(moored_positions(settings(position=(5.0, 6.0)), (300.0, 200.0), np.random.default_rng(1)), [[5.0, 6.0]])
