"""Laws as products of powers: reading, dimensions, published curves."""

from __future__ import annotations

import numpy as np
import pytest

from lespost.errors import RequestError
from lespost.scaling.laws import BUILT_IN, dimensions, parse_law, unit_text, usable
from tests.unit.scaling.storms import scattered


def test_products_are_read() -> None:
    assert parse_law("us^0.5 ustar^0.5").powers == {"us0": 0.5, "ustar": 0.5}
    assert parse_law("us0^1/3 u*^2/3").powers == pytest.approx({"us0": 1 / 3, "ustar": 2 / 3})
    assert parse_law("ustar^2 wind_speed**-1").powers == {"ustar": 2.0, "wind_speed": -1.0}
    free = parse_law("ustar la_t^n")
    assert free.free
    assert free.base == {"ustar": 1.0}
    assert free.powers == {"ustar": 0.5, "us0": -0.5}
    # closed form: u* La_t^-2 = u_s0
    assert parse_law("ustar la_t^-2").powers == pytest.approx({"us0": 1.0})
    assert parse_law("wstar").powers == {"b0": 1 / 3, "h": 1 / 3}


@pytest.mark.parametrize("text", ["salt^2", "us0 / ustar", "us0^x", "us0^1/0", "ustar ustar^-1", "velocity us0", "ustar la_t^n us0^n", ""])
def test_what_cannot_be_read_is_refused(text: str) -> None:
    with pytest.raises(RequestError):
        parse_law(text)


def test_built_in_laws_are_velocities() -> None:
    for law in BUILT_IN.values():
        if law.free:
            assert dimensions(law.base) == (1.0, -1.0)
            assert dimensions(law.powers) == (0.0, 0.0)
        else:
            assert law.dimensions() == pytest.approx((1.0, -1.0)), law.name
    assert unit_text(2, -3) == "m2 s-3"
    assert unit_text(0, 0) == "1"


def test_local_exponents_of_a_published_curve_add_up_to_a_velocity() -> None:
    table = scattered(np.random.default_rng(0))
    law = BUILT_IN["w_rms van_roekel_2012"]
    powers = law.local_powers(table)
    assert sum(powers.values()) == pytest.approx(1.0, abs=1e-6)
    assert powers["us0"] > 0
    assert usable(BUILT_IN["wstar"], table) == "needs b0, h"
