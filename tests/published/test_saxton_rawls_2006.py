"""Saxton and Rawls (2006), Soil Sci. Soc. Am. J. 70:1569-1578, table 3: water held by texture class (from memory).

Printed to whole percents of volume, organic matter 2.5 % by mass.
"""

import numpy as np
import pytest

from etflux.stands import class_available_water, packaged, water_retention

# sand, clay, wilting point, field capacity [%]; the classes of the package, and three more
PRINTED = {
    "sand": (88, 5, 5, 10), "loamy_sand": (80, 5, 5, 12), "sandy_loam": (65, 10, 8, 18), "loam": (40, 20, 14, 28),
    "silt_loam": (20, 15, 11, 31), "silt": (10, 5, 6, 30), "silty_clay_loam": (10, 35, 22, 38),
    "silty_clay": (10, 45, 27, 41), "clay": (25, 50, 30, 42), "sandy_clay_loam": (60, 25, 17, 27),
    "clay_loam": (30, 35, 22, 36), "sandy_clay": (50, 40, 25, 36),
}  # fmt: skip


@pytest.mark.parametrize("name", PRINTED)
def test_table_3(name):
    sand, clay, wilting, capacity = PRINTED[name]
    theta_fc, theta_wp = water_retention(sand, clay, 2.5)
    # half of the last printed digit, and a little more for a published fit rounded to three figures
    assert 100.0 * theta_wp == pytest.approx(wilting, abs=0.6)
    assert 100.0 * theta_fc == pytest.approx(capacity, abs=0.6)


def test_every_packaged_soil_is_a_class():
    ids = packaged("soils")["soil_id"].to_numpy()
    found = class_available_water(ids)
    assert np.isfinite(found).all()
    for name, value in zip(ids, found, strict=True):
        sand, clay, wilting, capacity = PRINTED[name]
        assert value == pytest.approx(10.0 * (capacity - wilting), abs=10.0), name
