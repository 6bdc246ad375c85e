"""Areas from vector files."""

import json

import numpy as np
import pyogrio
import pytest
import shapely

from fieldgen.errors import InputError
from fieldgen.readers.areas import read_areas

SQUARE = shapely.box(350000, 5250000, 360000, 5262000)
TWO = shapely.MultiPolygon([shapely.box(0, 0, 1, 1), shapely.box(2, 2, 3, 3)])


def write(path, outlines, names=None, crs="EPSG:32626", field="name"):
    """A vector file, by GDAL."""
    names = names or [f"area {number}" for number in range(len(outlines))]
    pyogrio.raw.write(
        path, shapely.to_wkb(np.array(outlines, object)), [np.array(names, object)], [field],
        crs=crs, geometry_type="Unknown" if path.suffix != ".shp" else "Polygon",
    )  # fmt: skip
    return path


@pytest.mark.parametrize("suffix", ["gpkg", "shp", "geojson"])
def test_read_areas_reads_what_gdal_wrote(tmp_path, suffix):
    """Round trip through another library: names, and the outline's size in its projection."""
    import pyproj

    outline, crs = SQUARE, "EPSG:32626"
    if suffix == "geojson":  # which is in degrees
        change = pyproj.Transformer.from_crs(crs, "EPSG:4326", always_xy=True)
        outline, crs = shapely.segmentize(SQUARE, 100.0), "EPSG:4326"
        outline = shapely.transform(outline, change.transform, interleaved=False)
    areas = read_areas(write(tmp_path / f"areas.{suffix}", [outline], ["Alder"], crs))
    assert areas.names == ["Alder"]
    (found,) = areas.in_crs("EPSG:32626")
    assert found.area == pytest.approx(SQUARE.area, rel=1e-6)
    (degrees,) = areas.in_degrees()
    assert -29 < degrees.centroid.x < -28


def test_read_areas_names_them(tmp_path):
    """Names twice or blank are made different; another field, in any case, can be asked for."""
    path = write(tmp_path / "a.gpkg", [SQUARE] * 3, ["Elm", "Elm", ""])
    assert read_areas(path).names == ["Elm", "Elm (2)", "3"]
    path = write(tmp_path / "b.gpkg", [SQUARE], ["X7"], field="CODE")
    assert read_areas(path).names == ["1"]
    assert read_areas(path, "code").names == ["X7"]


def test_read_areas_mends_and_leaves_out(tmp_path):
    """Negative control: a bow tie is mended, a line left out, and both are told."""
    tie = shapely.Polygon([(0, 0), (1000, 1000), (1000, 0), (0, 1000)])
    line = shapely.LineString([(0, 0), (1, 1)])
    areas = read_areas(write(tmp_path / "a.gpkg", [line, tie, TWO]))
    assert areas.names == ["area 1", "area 2"]
    assert areas.outlines[0].is_valid
    assert areas.outlines[0].area == pytest.approx(5e5)
    assert len(areas.notes) == 2
    assert "feature 1, area 0: is LineString, expected a polygon" in areas.notes[0]


@pytest.mark.parametrize(
    ("case", "expected"),
    [("missing", "cannot be read"), ("no crs", "names no CRS"), ("no field", "field 'river'"),
     ("no polygon", "holds no polygon"), ("empty", "holds no outlines"),
     ("text", "cannot be read")],
)  # fmt: skip
def test_read_areas_tells_what_is_wrong(tmp_path, case, expected):
    """Negative control: one clear error that names the file."""
    path, field = tmp_path / "areas.gpkg", "river" if case == "no field" else None
    if case == "no crs":
        path = tmp_path / "areas.shp"
        write(path, [SQUARE])
        path.with_suffix(".prj").unlink()
    elif case == "no field":
        write(path, [SQUARE])
    elif case == "no polygon":
        write(path, [shapely.Point(0, 0)])
    elif case == "empty":
        path = tmp_path / "areas.geojson"
        path.write_text(json.dumps({"type": "FeatureCollection", "features": []}))
    elif case == "text":
        path.write_text("not a map")
    with pytest.raises(InputError, match=expected) as caught:
        read_areas(path, field)
    assert str(path) in str(caught.value)
