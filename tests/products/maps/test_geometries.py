"""GeoJSON files and the outlines cut from them."""

import json

import pytest
import shapely

from fieldgen.errors import InputError
from fieldgen.products.maps import read_geometries
from fieldgen.products.maps.geometries import clip_outlines


@pytest.mark.parametrize("turn", [0, 360], ids=["-180 to 180", "0 to 360"])
def test_clip_outlines_finds_lines_counted_from_any_meridian(turn):
    region = (178.0, 181.0, -20.0, -17.0)
    east = shapely.LineString([(-179.8 + turn, -18), (-179.2 + turn, -18)])
    far = shapely.LineString([(10, 50), (11, 50)])
    (line,) = clip_outlines([far, east, shapely.Point(179, -18)], region)
    assert line.length == pytest.approx(0.6)


def test_clip_outlines_of_an_area_leaves_no_line_along_the_cut():
    """Analytic: a land that covers the whole region has no coast in it."""
    assert clip_outlines([shapely.box(-50, -50, 50, 50)], (0, 1, 0, 1)) == []
    assert clip_outlines([], (0, 1, 0, 1)) == []


GEOJSON = {
    "collection": {
        "type": "FeatureCollection",
        "features": [
            {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 2]}},
            {"type": "Feature", "geometry": None},
        ],
    },
    "feature": {"type": "Feature", "geometry": {"type": "Point", "coordinates": [1, 2]}},
    "geometry": {"type": "Point", "coordinates": [1, 2]},
}


@pytest.mark.parametrize("document", GEOJSON.values(), ids=GEOJSON.keys())
def test_read_geometries_reads_every_kind_of_document(tmp_path, document):
    path = tmp_path / "coast.geojson"
    path.write_text(json.dumps(document), encoding="utf-8")
    assert read_geometries(path) == [shapely.Point(1, 2)]


BROKEN = {
    "text": b"not json",
    "bytes": b"\xff\xfe\x00",
    "list": b"[1, 2]",
    "number": b"3",
    "other object": b'{"name": "coast"}',
    "no coordinates": b'{"type": "Point"}',
    "unknown type": b'{"type": "Blob", "coordinates": [1, 2]}',
    "words": b'{"type": "LineString", "coordinates": "north"}',
    "short line": b'{"type": "LineString", "coordinates": [[1, 2]]}',
    "feature list": b'{"type": "FeatureCollection", "features": 4}',
}


@pytest.mark.parametrize("content", BROKEN.values(), ids=BROKEN.keys())
def test_read_geometries_names_a_file_that_is_not_geojson(tmp_path, content):
    path = tmp_path / "coast.geojson"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"coast\.geojson: the content is not GeoJSON"):
        read_geometries(path)


def test_read_geometries_names_a_missing_file(tmp_path):
    with pytest.raises(InputError, match=r"coast\.geojson: the file cannot be read"):
        read_geometries(tmp_path / "coast.geojson")
