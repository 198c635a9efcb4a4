"""Census Bureau, 2017 Gazetteer Files, counties: land and water area, internal point.

The packaged outlines are of the same year. They are simplified and their areas taken on a sphere, which alone is 0.7 %
low in the interior of Alaska, 0.1 to 0.2 % low at 38 to 43 degrees north and 0.1 % high at 32: M N / R2 of the GRS 80
ellipsoid. Counties on the sea cannot be compared: the Gazetteer counts their share of the sea, the outlines do not.
"""

import math

import numpy as np
import pytest

from etflux import outlines

GAZETTEER = {  # GEOID: land and water area [m2], internal point [degrees]
    "01001": (1539614693, 25744269, 32.532237, -86.64644), "02068": (32729613863, 66068878, 63.681106, -150.026544),
    "02240": (64290353013, 752301282, 63.864997, -143.218628),
    "02290": (377030936019, 5953180597, 65.375718, -151.577873),
    "04005": (48222181220, 110085803, 35.829692, -111.773728), "04023": (3203613249, 3088046, 31.525733, -110.845228),
    "05001": (2560988637, 116409463, 34.28957, -91.376547), "19015": (1480381942, 5358723, 42.038642, -93.938358),
    "19043": (2016295994, 36695627, 42.840985, -91.323576), "19153": (1482734960, 49332276, 41.684816, -93.568971),
    "19169": (1483235295, 2509634, 42.037538, -93.466093), "19193": (2260790978, 12793719, 42.39322, -96.053296),
    "20055": (3372066557, 1794398, 38.049808, -100.739967), "20155": (3251326003, 43423736, 37.948185, -98.078346),
    "20209": (392650861, 11890119, 39.115384, -94.763087), "21067": (734615998, 4922111, 38.040676, -84.458274),
    "21201": (258799092, 484952, 38.513473, -84.06423), "21209": (729781719, 9487693, 38.289882, -84.579376),
    "22059": (1617924843, 97664776, 31.680083, -92.161596),
}  # fmt: skip
GRS80_A_KM, GRS80_E2 = 6378.137, 0.00669438002290


def sphere_over_ellipsoid(latitude_deg):
    """Area that a sphere of the mean radius gives a small piece of the ellipsoid, as a ratio."""
    root = 1.0 - GRS80_E2 * math.sin(math.radians(latitude_deg)) ** 2
    return outlines.EARTH_RADIUS_KM**2 * root**2 / (GRS80_A_KM**2 * (1.0 - GRS80_E2))


@pytest.mark.parametrize("geoid", GAZETTEER)
def test_outline_area_and_middle(geoid):
    """1.5 %: what the simplified lines leave out or add; the smallest counties have most of it."""
    land, water, latitude, longitude = GAZETTEER[geoid]
    area, lat, lon = outlines.area_and_centroid(outlines.us_counties()[geoid])
    assert area == pytest.approx((land + water) / 1e6 * sphere_over_ellipsoid(latitude), rel=0.015)
    # An internal point is near the middle, not at it: a tenth of the county's width would be another place.
    km = np.hypot(lat - latitude, (lon - longitude) * math.cos(math.radians(lat))) * 111.2
    assert km < 0.1 * math.sqrt(area)


def test_large_counties_differ_by_the_sphere_alone():
    """The border of a large county matters little: within 0.2 %."""
    for geoid in ("02068", "02240", "02290", "04005"):
        land, water, latitude, _ = GAZETTEER[geoid]
        area, _, _ = outlines.area_and_centroid(outlines.us_counties()[geoid])
        assert area == pytest.approx((land + water) / 1e6 * sphere_over_ellipsoid(latitude), rel=0.002)


def test_islands_on_both_sides_of_the_date_line():
    """Aleutians West, land 11377 km2 (the sea is not in the outlines): simplified islands, 10 %; its middle is west of
    Unalaska and east of Attu (172.9 degrees east, from memory), and not on the other side of the earth."""
    area, latitude, longitude = outlines.area_and_centroid(outlines.us_counties()["02016"])
    assert area == pytest.approx(11376.6, rel=0.10)
    assert 51.2 < latitude < 54.4
    assert longitude > 172.9 or longitude < -166.0
