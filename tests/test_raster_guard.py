"""What the raster guard refuses, in words, without a path, and before anything is read."""

from __future__ import annotations

import ast
from pathlib import Path

import numpy as np
import pytest
import rasterio
import rasterio.warp
from affine import Affine

from geo import raster_guard
from geo.frame import frame_for
from geo.raster_guard import CLASS_TYPES, open_raster, raster_files, read_window
from geo.terrain import TerrainStore
from perf.errors import TerrainError

ROOT = Path(__file__).resolve().parents[1]


def write(path, heights, *, dtype="float32", crs="EPSG:32632", **options):
    """Write heights as a GeoTIFF of 30 m cells; return the path."""
    path.parent.mkdir(parents=True, exist_ok=True)
    heights = np.asarray(heights, dtype=dtype)
    bands = heights if heights.ndim == 3 else heights[np.newaxis]
    profile = {"crs": crs, "transform": Affine(30, 0, 400_000, 0, -30, 5_100_000), **options}
    with rasterio.open(
        path, "w", driver="GTiff", width=bands.shape[2], height=bands.shape[1],
        count=bands.shape[0], dtype=dtype, **profile,
    ) as out:  # fmt: skip
        out.write(bands)
    return path


def refusal_of(path, dtypes=raster_guard.HEIGHT_TYPES):
    """Return the words with which a file is refused, checked to carry no path."""
    with pytest.raises(TerrainError) as caught, open_raster(path, dtypes):
        pass
    assert path.name in caught.value.detail
    assert str(path.parent) not in f"{caught.value.detail}{caught.value.allowed}"
    assert "/" not in caught.value.detail
    assert caught.value.allowed
    assert caught.value.__cause__ is None
    return caught.value.detail


def test_a_plain_raster_is_read(tmp_path):
    heights = np.arange(12.0).reshape(3, 4)
    path = write(tmp_path / "plain.tif", heights, nodata=5.0)
    with open_raster(path) as data:
        values = read_window(data, path, (1, 3, 0, 2))
    assert values.mask.tolist() == [[False, True], [False, False]]
    assert values.filled(-1.0).tolist() == [[4.0, -1.0], [8.0, 9.0]]


def test_a_text_that_points_elsewhere_is_refused(tmp_path):
    real = write(tmp_path / "real.tif", np.ones((4, 4)))
    trap = tmp_path / "trap.tif"
    trap.write_text(
        '<VRTDataset rasterXSize="4" rasterYSize="4"><SRS>EPSG:32632</SRS>'
        "<GeoTransform>400000,30,0,5100000,0,-30</GeoTransform>"
        '<VRTRasterBand dataType="Float32" band="1"><SimpleSource>'
        f"<SourceFilename>{real}</SourceFilename></SimpleSource></VRTRasterBand></VRTDataset>"
    )
    with rasterio.open(trap) as opened:  # the trap works where no driver is named
        assert opened.driver == "VRT"
    assert "not a raster of its kind" in refusal_of(trap)


@pytest.mark.parametrize("content", [b"", b"II*\0", b"not a raster", b"\x89PNG\r\n\x1a\n"])
def test_what_is_no_raster_is_refused(tmp_path, content):
    path = tmp_path / "file.tif"
    path.write_bytes(content)
    assert "is cut short or is not a raster" in refusal_of(path)


@pytest.mark.parametrize(
    "options", [{}, {"compress": "deflate"}, {"compress": "lzw", "tiled": True}]
)
@pytest.mark.parametrize("share", [0.02, 0.5, 0.97])
def test_a_truncated_file_is_refused_at_the_latest_when_read(tmp_path, options, share):
    heights = np.random.default_rng(1).uniform(0, 2000, (300, 300))
    path = write(tmp_path / "terrain" / "cut.tif", heights, **options)
    whole = path.read_bytes()
    path.write_bytes(whole[: int(len(whole) * share)])
    with pytest.raises(TerrainError) as caught:
        TerrainStore(tmp_path).ground_m(*place(path, whole))
    assert "cut.tif" in caught.value.detail
    assert "cut short" in caught.value.detail
    assert str(tmp_path) not in caught.value.detail


def place(path, whole):
    """Return longitudes and latitudes over the whole file."""
    copy = path.with_name("whole.bin")
    copy.write_bytes(whole)
    with rasterio.open(copy, driver="GTiff") as data:
        x, y = np.meshgrid(
            np.linspace(data.bounds.left + 50, data.bounds.right - 50, 40),
            np.linspace(data.bounds.bottom + 50, data.bounds.top - 50, 40),
        )
        lon, lat = rasterio.warp.transform(data.crs, "EPSG:4326", x.ravel(), y.ravel())
    return np.array(lon), np.array(lat)


def test_a_small_file_that_unpacks_to_gigabytes_is_refused(tmp_path):
    path = tmp_path / "bomb.tif"
    with rasterio.open(
        path, "w", driver="GTiff", width=19_000, height=19_000, count=1, dtype="float64",
        crs="EPSG:32632", transform=Affine(30, 0, 400_000, 0, -30, 5_100_000), tiled=True,
        blockxsize=512, blockysize=512, SPARSE_OK=True, compress="deflate",
    ):  # fmt: skip
        pass
    with path.open("ab") as more:
        more.truncate(2_000_000)
    # Derived: 19000^2 * 8 bytes = 2.9 GB from 2 MB, 1400 times.
    assert "packed more densely" in refusal_of(path)


def test_the_pixel_budget(tmp_path, monkeypatch):
    monkeypatch.setattr(raster_guard, "MAX_PIXELS", 10_000)
    with open_raster(write(tmp_path / "under.tif", np.zeros((100, 100)))) as data:
        assert data.width == 100
    assert "more than 400 million cells" in refusal_of(
        write(tmp_path / "over.tif", np.zeros((100, 101)))
    )


def test_the_block_budget(tmp_path, monkeypatch):
    path = write(tmp_path / "strips.tif", np.zeros((256, 256)), compress="deflate", blockysize=64)
    monkeypatch.setattr(raster_guard, "MAX_BLOCK_BYTES", 64 * 256 * 4)
    with open_raster(path) as data:
        assert data.block_shapes == [(64, 256)]
    monkeypatch.setattr(raster_guard, "MAX_BLOCK_BYTES", 64 * 256 * 4 - 1)
    assert "unpacks more than 64 MB at once" in refusal_of(path)


def test_a_block_of_more_than_64_mb_is_refused(tmp_path):
    heights = np.zeros((8192, 8208), dtype=np.uint8)  # Derived: 67.2 million bytes, 64.1 MB
    path = write(
        tmp_path / "tile.tif", heights, dtype="uint8", compress="lzw", tiled=True,
        blockxsize=8208, blockysize=8192,
    )  # fmt: skip
    assert "unpacks more than 64 MB at once" in refusal_of(path)


def test_the_packing_budget(tmp_path, monkeypatch):
    monkeypatch.setattr(raster_guard, "MAX_UNPACKED_BYTES", 1000)
    path = write(tmp_path / "flat.tif", np.zeros((400, 400)), compress="deflate")
    ratio = 400 * 400 * 4 / path.stat().st_size
    monkeypatch.setattr(raster_guard, "MAX_UNPACK_RATIO", ratio * 1.0001)
    with open_raster(path) as data:
        assert data.count == 1
    monkeypatch.setattr(raster_guard, "MAX_UNPACK_RATIO", ratio * 0.9999)
    assert "packed more densely" in refusal_of(path)


def test_bands_types_and_place(tmp_path):
    zeros = np.zeros((4, 4))
    assert "more than one band" in refusal_of(write(tmp_path / "two.tif", np.zeros((2, 4, 4))))
    assert "a type that is not read" in refusal_of(
        write(tmp_path / "complex.tif", zeros, dtype="complex64")
    )
    assert "a type that is not read" in refusal_of(
        write(tmp_path / "classes.tif", zeros), CLASS_TYPES
    )
    assert "where it lies" in refusal_of(write(tmp_path / "nocrs.tif", zeros, crs=None))


def test_side_files_are_not_looked_at(tmp_path):
    path = write(tmp_path / "heights.tif", np.full((4, 4), 7.0))
    (tmp_path / "heights.tif.aux.xml").write_text(
        '<PAMDataset><PAMRasterBand band="1"><NoDataValue>7</NoDataValue>'
        "</PAMRasterBand></PAMDataset>"
    )
    (tmp_path / "heights.tif.msk").write_bytes(b"no mask")
    with open_raster(path) as data:
        assert data.nodata is None
        assert not np.ma.getmaskarray(read_window(data, path, (0, 4, 0, 4))).any()


def test_only_raster_suffixes_are_listed(tmp_path):
    for name in ("b.tif", "a.TIFF", "c.vrt", "d.tif.aux.xml", "N46E007.hgt"):
        (tmp_path / name).touch()
    assert [path.name for path in raster_files(tmp_path)] == ["N46E007.hgt", "a.TIFF", "b.tif"]
    assert raster_files(tmp_path / "absent") == []


def test_a_refused_file_stops_only_the_answers_that_may_need_it(tmp_path, monkeypatch):
    write(tmp_path / "terrain" / "good.tif", np.full((40, 40), 100.0))
    far = Affine(30, 0, 500_000, 0, -30, 5_100_000)
    write(tmp_path / "terrain" / "two.tif", np.zeros((2, 40, 40)), transform=far)
    store = TerrainStore(tmp_path)
    assert [source.file for source in store.sources] == ["good.tif"]
    assert any("two.tif" in note for note in store.notes)
    to_lonlat = rasterio.warp.transform
    (lon_good, lon_bad), (lat_good, lat_bad) = to_lonlat(
        "EPSG:32632", "EPSG:4326", [400_600, 500_600], [5_099_400, 5_099_400]
    )
    assert float(store.ground_m(lon_good, lat_good)) == pytest.approx(100.0)
    with pytest.raises(TerrainError, match=r"two\.tif"):
        store.ground_m(lon_bad, lat_bad)
    frame = frame_for(lon_bad, lat_bad)
    x_m, y_m = frame.to_xy_m(lon_bad, lat_bad)
    with pytest.raises(TerrainError, match=r"two\.tif"):
        store.window(frame, int(x_m // 30), int(y_m // 30), 4, 4, 30.0)
    (tmp_path / "terrain" / "text.tif").write_text("<VRTDataset/>")
    with pytest.raises(TerrainError, match=r"text\.tif"):  # it may lie anywhere
        TerrainStore(tmp_path).ground_m(lon_good, lat_good)


def test_a_folder_without_terrain_is_refused(tmp_path):
    with pytest.raises(TerrainError, match="no terrain folder"):
        TerrainStore(tmp_path)


def test_every_open_names_its_driver():
    files = [path for room in ("perf", "geo", "service") for path in (ROOT / room).rglob("*.py")]
    opens = [
        (path.name, {keyword.arg for keyword in node.keywords})
        for path in files
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8")))
        if isinstance(node, ast.Call) and ast.unparse(node.func) == "rasterio.open"
    ]
    assert opens
    assert all("driver" in keywords for _, keywords in opens), opens
