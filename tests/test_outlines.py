"""County outlines: formats, measures, shared borders, and files that are none."""

import json
import math

import numpy as np
import pytest

from etflux import outlines
from etflux.findings import CannotRead
from etflux.outlines import EARTH_RADIUS_KM, area_and_centroid, shared_borders


def _square(west, south, size=1.0):
    east, north = west + size, south + size
    return [[west, south], [east, south], [east, north], [west, north], [west, south]]


def _feature(county_id, *rings, **properties):
    return {
        "type": "Feature",
        "properties": {"county_id": county_id, **properties},
        "geometry": {"type": "Polygon", "coordinates": list(rings)},
    }


def _file(path, *features):
    path.write_text(json.dumps({"type": "FeatureCollection", "features": list(features)}), encoding="utf-8")
    return path


def _topology(arcs, points=None, identity="a", kind="Polygon"):
    """A topology of one geometry and one arc."""
    geometry = {"type": kind, "arcs": arcs} | ({} if identity is None else {"id": identity})
    layer = {"counties": {"type": "GeometryCollection", "geometries": [geometry]}}
    return json.dumps({"type": "Topology", "objects": layer, "arcs": [points or _square(-95.0, 41.0)]})


def test_area_of_a_band_is_the_spherical_formula(tmp_path):
    found = outlines.read(_file(tmp_path / "a.geojson", _feature("a", _square(-95.0, 41.0), name="Aldmoor")))["a"]
    area, latitude, longitude = area_and_centroid(found)
    exact = EARTH_RADIUS_KM**2 * math.radians(1.0) * (math.sin(math.radians(42.0)) - math.sin(math.radians(41.0)))
    assert found.name == "Aldmoor"
    assert area == pytest.approx(exact, rel=1e-9)
    assert (latitude, longitude) == pytest.approx((41.5, -94.5), abs=0.01)


def test_hole_is_left_out_and_ring_order_does_not_matter(tmp_path):
    hole = _square(-94.75, 41.25, 0.5)
    forward = outlines.read(_file(tmp_path / "f.geojson", _feature("a", _square(-95.0, 41.0), hole)))["a"]
    back = outlines.read(_file(tmp_path / "b.geojson", _feature("a", _square(-95.0, 41.0)[::-1], hole[::-1])))["a"]
    assert area_and_centroid(forward)[0] == pytest.approx(area_and_centroid(back)[0])
    whole = outlines.read(_file(tmp_path / "w.geojson", _feature("a", _square(-95.0, 41.0))))["a"]
    assert area_and_centroid(forward)[0] < 0.76 * area_and_centroid(whole)[0]


def test_neighbours_share_a_border_and_its_normal_points_across(tmp_path):
    found = outlines.read(
        _file(tmp_path / "n.geojson", _feature("west", _square(-95.0, 41.0)), _feature("east", _square(-94.0, 41.0)))
    )
    (border,) = shared_borders(found)
    across = np.array(border.normal) * (1.0 if border.first == "west" else -1.0)
    assert {border.first, border.second} == {"west", "east"}
    assert across == pytest.approx([1.0, 0.0], abs=1e-9)
    assert border.length_km == pytest.approx(EARTH_RADIUS_KM * math.radians(1.0))


def test_topojson_arcs_become_rings(tmp_path):
    topology = {
        "type": "Topology",
        "transform": {"scale": [0.5, 0.5], "translate": [-95.0, 41.0]},
        "objects": {"counties": {"type": "GeometryCollection", "geometries": [
            {"type": "Polygon", "arcs": [[0, 1]], "id": "a", "properties": {"name": "Aldmoor"}},
            {"type": "Polygon", "arcs": [[2, -2]], "id": "b", "properties": {}},
        ]}},
        "arcs": [
            [[2, 2], [-2, 0], [0, -2], [2, 0]],
            [[2, 0], [0, 2]],
            [[2, 0], [2, 0], [0, 2], [-2, 0]],
        ],
    }  # fmt: skip
    path = tmp_path / "t.topojson"
    path.write_text(json.dumps(topology))
    found = outlines.read(path)
    assert area_and_centroid(found["a"])[1:] == pytest.approx((41.5, -94.5), abs=0.01)
    (border,) = shared_borders(found)
    assert {border.first, border.second} == {"a", "b"}


def test_shapefile_is_read(tmp_path):
    import shapefile

    with shapefile.Writer(str(tmp_path / "s")) as writer:
        writer.field("GEOID", "C")
        writer.field("NAME", "C")
        writer.poly([_square(-95.0, 41.0)[::-1]])
        writer.record("97001", "Aldmoor")
    found = outlines.read(tmp_path / "s.shp")
    assert found["97001"].name == "Aldmoor"
    assert area_and_centroid(found["97001"])[0] > 9000.0


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("not json", "is not JSON"),
        ("[" * 100_000, "is not JSON"),
        ("{}", "not a GeoJSON feature collection"),
        (json.dumps({"type": "FeatureCollection", "features": []}), "has no polygons"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("", _square(0, 0))]}), "has no id"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("a", _square(500, 0))]}), "not in degrees"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("a", [["x", 1]])]}), "broken coordinates"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("a", [[10**400, 1]] * 4)]}), "broken coord"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("a", [])]}), "broken coordinates"),
        (json.dumps({"type": "FeatureCollection", "features": [_feature("a")]}), "has no polygon"),
        (json.dumps({"type": "FeatureCollection", "features": [7]}), "not a GeoJSON feature"),
        (json.dumps({"type": "FeatureCollection", "features": [{"properties": [1], "geometry": None}]}), "not a GeoJ"),
        (
            json.dumps(
                {
                    "type": "FeatureCollection",
                    "features": [{"properties": {"county_id": "a"}, "geometry": {"type": "Polygon"}}],
                }
            ),
            "no polygon|broken coordinates",
        ),
        (
            json.dumps(
                {
                    "type": "FeatureCollection",
                    "features": [
                        {"properties": {"county_id": "a"}, "geometry": {"type": "MultiPolygon", "coordinates": None}}
                    ],
                }
            ),
            "broken",
        ),
        (json.dumps({"type": "Topology"}), "broken TopoJSON"),
        (json.dumps({"type": "Topology", "objects": {}, "arcs": []}), "broken TopoJSON"),
        (json.dumps({"type": "Topology", "objects": [], "arcs": []}), "broken TopoJSON"),
        (_topology(arcs=[[5]]), "broken TopoJSON"),
        (_topology(arcs=[["x"]]), "broken TopoJSON"),
        (_topology(arcs=[[0]], points=[[500.0, 0.0]] * 4), "not in degrees"),
        (_topology(arcs=[[0]], identity=None), "no id"),
        (_topology(arcs=[], kind="Point"), "has no polygons"),
    ],
)
def test_what_is_no_outline_is_said(text, message, tmp_path):
    path = tmp_path / "bad.geojson"
    path.write_text(text)
    with pytest.raises(CannotRead, match=message):
        outlines.read(path)


def test_topojson_ids_may_be_among_the_properties(tmp_path):
    text = json.loads(_topology(arcs=[[0]], identity=None))
    text["objects"]["counties"]["geometries"][0]["properties"] = {"GEOID": "19169", "NAME": "Aldmoor"}
    (tmp_path / "t.json").write_text(json.dumps(text))
    (found,) = outlines.read(tmp_path / "t.json").values()
    assert (found.county_id, found.name) == ("19169", "Aldmoor")


def test_a_ring_that_is_left_open_is_closed(tmp_path):
    closed, left_open = (
        outlines.read(_file(tmp_path / f"{end}.geojson", _feature("a", _square(-95.0, 41.0)[:end])))["a"]
        for end in (5, 4)
    )
    assert area_and_centroid(left_open) == pytest.approx(area_and_centroid(closed))


def test_what_is_written_reads_back_with_the_same_borders(tmp_path):
    two = outlines.read(
        _file(tmp_path / "n.geojson", _feature("w", _square(-95.0, 41.0)), _feature("e", _square(-94.0, 41.0)))
    )
    (tmp_path / "again.geojson").write_text(json.dumps(outlines.to_geojson(two)))
    again = outlines.read(tmp_path / "again.geojson")
    assert shared_borders(again) == shared_borders(two)
    assert [outline.name for outline in again.values()] == [outline.name for outline in two.values()]


def test_a_large_file_is_refused_unless_asked_for(tmp_path):
    path = _file(tmp_path / "n.geojson", _feature("w", _square(-95.0, 41.0)))
    with pytest.raises(CannotRead, match="more than the"):
        outlines.read(path, largest_bytes=100)
    assert outlines.read(path, largest_bytes=None)


def test_missing_file_and_broken_shapefile(tmp_path):
    with pytest.raises(CannotRead, match="cannot be opened"):
        outlines.read(tmp_path / "none.geojson")
    (tmp_path / "bad.shp").write_bytes(b"nothing")
    with pytest.raises(CannotRead, match="not a readable shapefile"):
        outlines.read(tmp_path / "bad.shp")


def test_holes_that_reach_out_of_the_outline_never_crash_the_measuring(tmp_path):
    bent = [[-95.0, 41.0], [-1.0, 41.0], [-94.0, 42.0], [1.0, 42.0], [-95.0, 41.0]]
    found = outlines.read(_file(tmp_path / "b.geojson", _feature("a", bent, bent)))["a"]
    area, latitude, longitude = area_and_centroid(found)
    assert area == pytest.approx(0.0, abs=1.0)
    assert 41.0 <= latitude <= 42.0
    assert -95.0 <= longitude <= 1.0


def test_broken_numbers_of_a_topology_are_said(tmp_path):
    for change in ({"scale": [0.5, 10**400]}, {"scale": 1e308}, {"translate": [None, 41]}):
        text = json.loads(_topology(arcs=[[0]], points=[[2, 2], [2, 2], [-2, 2]]))
        text["transform"] = {"scale": [0.5, 0.5], "translate": [-95, 41]} | change
        (tmp_path / "t.json").write_text(json.dumps(text))
        with pytest.raises(CannotRead, match=r"broken TopoJSON|not in degrees"):
            outlines.read(tmp_path / "t.json")
