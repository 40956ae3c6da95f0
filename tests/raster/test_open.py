"""Files that are not what they should be are refused in words that say what to do."""

from __future__ import annotations

import os
import pickle
import threading
from pathlib import Path

import numpy as np
import pytest
import rasterio
from affine import Affine
from rasterio.control import GroundControlPoint
from rasterio.rpc import RPC

from groundglow.errors import InputError
from groundglow.raster.environment import CACHE_MEGABYTES, gdal_environment
from groundglow.raster.fingerprint import belonging_files, fingerprint
from groundglow.raster.open import close_rasters, describe_raster, open_raster
from groundglow.raster.source import RasterSource, read_block, source_grid
from painted_rasters import UTM, grid, whole, write

HERE = grid(40, 30)


def painted(path: Path, **profile: object) -> str:
    return write(path, np.arange(1200, dtype=np.uint16).reshape(30, 40), HERE, **profile)


def test_a_missing_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"nowhere.tif: there is no such file. Check the path"):
        open_raster(str(tmp_path / "nowhere.tif"))


def test_an_empty_file(tmp_path: Path) -> None:
    (tmp_path / "empty.tif").touch()
    with pytest.raises(InputError, match=r"empty.tif: the file is empty \(0 bytes\)"):
        open_raster(str(tmp_path / "empty.tif"))


def test_a_text_file(tmp_path: Path) -> None:
    (tmp_path / "notes.tif").write_text("Dies ist kein Bild, sondern Text; ä ö ü.\n" * 30, encoding="utf-8")
    with pytest.raises(InputError, match=r"notes.tif: is a text file, not a raster"):
        open_raster(str(tmp_path / "notes.tif"))


def test_a_binary_file_of_another_kind(tmp_path: Path) -> None:
    (tmp_path / "noise.tif").write_bytes(bytes(range(256)) * 8)
    with pytest.raises(InputError, match="is not a raster that GDAL can read"):
        open_raster(str(tmp_path / "noise.tif"))


def test_folders(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    with pytest.raises(InputError, match="is an empty folder"):
        open_raster(str(tmp_path / "empty"))
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "note.txt").write_text("x")
    with pytest.raises(InputError, match="is a folder, not a raster"):
        open_raster(str(tmp_path / "other"))


@pytest.mark.parametrize("keep", [6, 100, 1000])
def test_a_tiff_cut_short(tmp_path: Path, keep: int) -> None:
    path = painted(tmp_path / "cut.tif")
    os.truncate(path, keep)
    with pytest.raises(
        InputError, match=r"cut\.tif: (is a TIFF whose header|pixels cannot be read|is not a raster)"
    ):
        describe_raster(path)


def test_a_tiff_cut_short_while_reading(tmp_path: Path) -> None:
    path = painted(tmp_path / "cut.tif", blockysize=4)
    os.truncate(path, Path(path).stat().st_size - 400)
    with pytest.raises(InputError, match=r"pixels cannot be read: the file is damaged or cut short"):
        read_block(RasterSource(path), HERE, whole(HERE))


def test_no_reference_system(tmp_path: Path) -> None:
    path = tmp_path / "lost.tif"
    with rasterio.open(path, "w", driver="GTiff", width=4, height=4, count=1, dtype="uint8",
                       transform=HERE.transform) as dataset:  # fmt: skip
        dataset.write(np.ones((1, 4, 4), dtype=np.uint8))
    with pytest.raises(InputError, match=r"lost.tif: has no coordinate reference system. .*gdal_edit"):
        describe_raster(str(path))


@pytest.mark.filterwarnings("ignore:Dataset has no geotransform")
def test_no_position_at_all(tmp_path: Path) -> None:
    path = tmp_path / "lost.png"
    with rasterio.open(path, "w", driver="PNG", width=4, height=4, count=1, dtype="uint8") as dataset:
        dataset.write(np.ones((1, 4, 4), dtype=np.uint8))
    with pytest.raises(InputError, match=r"has no position"):
        describe_raster(str(path))


@pytest.mark.filterwarnings("ignore:Dataset has no geotransform")
def test_ground_control_points_only(tmp_path: Path) -> None:
    path = tmp_path / "points.tif"
    corners = [(0, 0, 0, 0), (0, 4, 120, 0), (4, 0, 0, -120), (4, 4, 120, -120)]
    points = [GroundControlPoint(row, column, 600_000 + x, 5_300_000 + y) for row, column, x, y in corners]
    with rasterio.open(path, "w", driver="GTiff", width=4, height=4, count=1, dtype="uint8",
                       gcps=points, crs=UTM) as dataset:  # fmt: skip
        dataset.write(np.ones((1, 4, 4), dtype=np.uint8))
    with pytest.raises(InputError, match=r"placed by 4 ground control points.*gdalwarp -tps .* EPSG:32632"):
        describe_raster(str(path))


@pytest.mark.filterwarnings("ignore:Dataset has no geotransform")
def test_a_camera_model_only(tmp_path: Path) -> None:
    path = tmp_path / "model.tif"
    terms = [1.0] + [0.0] * 19
    model = RPC(height_off=0.0, height_scale=500.0, lat_off=47.8, lat_scale=0.1, line_den_coeff=terms,
                line_num_coeff=terms, line_off=2.0, line_scale=2.0, long_off=10.3, long_scale=0.1,
                samp_den_coeff=terms, samp_num_coeff=terms, samp_off=2.0, samp_scale=2.0)  # fmt: skip
    with rasterio.open(
        path, "w", driver="GTiff", width=4, height=4, count=1, dtype="uint8", rpcs=model
    ) as dataset:
        dataset.write(np.ones((1, 4, 4), dtype=np.uint8))
    with pytest.raises(InputError, match=r"placed by a camera model \(RPC\).*gdalwarp -rpc"):
        describe_raster(str(path))


def test_a_band_that_is_not_there(tmp_path: Path) -> None:
    path = painted(tmp_path / "one.tif")
    with pytest.raises(InputError, match=r"one.tif: has no band 3; it has 1"):
        read_block(RasterSource(path, band=3), HERE, whole(HERE))


def test_complex_numbers(tmp_path: Path) -> None:
    path = write(tmp_path / "wave.tif", np.ones(HERE.shape, dtype=np.complex64), HERE)
    with pytest.raises(InputError, match="holds complex numbers"):
        read_block(RasterSource(path), HERE, whole(HERE))


def virtual(folder: Path, name: str) -> str:
    source = painted(folder / "plain.tif")
    text = (
        '<VRTDataset rasterXSize="40" rasterYSize="30"><SRS>EPSG:32632</SRS>'
        "<GeoTransform>600000, 30, 0, 5300010, 0, -30</GeoTransform>"
        '<VRTRasterBand dataType="UInt16" band="1"><SimpleSource><SourceFilename relativeToVRT="1">'
        f"{Path(source).name}</SourceFilename><SourceBand>1</SourceBand></SimpleSource></VRTRasterBand></VRTDataset>"
    )
    (folder / name).write_text(text)
    return str(folder / name)


def test_a_virtual_raster_is_read_on_the_users_word_only(tmp_path: Path) -> None:
    named = virtual(tmp_path, "mosaic.vrt")
    assert source_grid(RasterSource(named)) == HERE
    with pytest.raises(
        InputError, match="makes GDAL read other files, which is refused because another file"
    ):
        source_grid(RasterSource(named, indirect=True))
    disguised = virtual(tmp_path, "thermal.tif")
    with pytest.raises(InputError, match="refused because its suffix does not say so"):
        source_grid(RasterSource(disguised))


def test_an_address_in_a_file_is_not_followed(tmp_path: Path) -> None:
    (tmp_path / "map.tif").write_text("<GDAL_WMS><Service name='TMS'><ServerUrl>http://127.0.0.1:9/</ServerUrl>"
                                      "</Service></GDAL_WMS>")  # fmt: skip
    with pytest.raises(InputError, match="makes GDAL read other files"):
        open_raster(str(tmp_path / "map.tif"))


def test_world_files_and_headers_beside_a_raster_are_found(tmp_path: Path) -> None:
    path = write(tmp_path / "plain.img", np.ones(HERE.shape, dtype=np.float32), HERE, driver="ENVI")
    assert source_grid(RasterSource(path)) == HERE
    assert str(tmp_path / "plain.hdr") in belonging_files(path)


def test_one_handle_a_thread_and_none_in_a_pickle(tmp_path: Path) -> None:
    path = painted(tmp_path / "one.tif")
    first = open_raster(path)
    assert open_raster(path) is first
    others = []
    worker = threading.Thread(target=lambda: others.append(open_raster(path)))
    worker.start()
    worker.join()
    assert others[0] is not first
    copied = pickle.loads(pickle.dumps(RasterSource(path)))
    assert copied == RasterSource(path)
    close_rasters()
    assert first.closed
    assert open_raster(path) is not first


def test_a_replaced_file_is_opened_anew(tmp_path: Path) -> None:
    path = painted(tmp_path / "one.tif")
    assert open_raster(path).dtypes == ("uint16",)
    write(tmp_path / "new.tif", np.zeros(HERE.shape, dtype=np.float32), HERE)
    (tmp_path / "new.tif").rename(path)
    assert open_raster(path).dtypes == ("float32",)


def test_gdal_keeps_a_small_cache_and_one_thread() -> None:
    with gdal_environment():
        options = rasterio.env.getenv()
        assert options["GDAL_CACHEMAX"] == CACHE_MEGABYTES == 64
        assert options["GDAL_NUM_THREADS"] == "1"
        assert options["GDAL_PAM_ENABLED"] == "NO"
        assert options["GDAL_DISABLE_READDIR_ON_OPEN"] == "TRUE"


def test_reading_leaves_nothing_beside_the_raster(tmp_path: Path) -> None:
    path = painted(tmp_path / "one.tif")
    read_block(RasterSource(path), HERE, whole(HERE))
    assert [file.name for file in tmp_path.iterdir()] == ["one.tif"]


def test_a_fingerprint_is_size_and_sha256(tmp_path: Path) -> None:
    # FIPS 180-4 example: SHA-256 of "abc".
    (tmp_path / "abc").write_bytes(b"abc")
    found = fingerprint(str(tmp_path / "abc"))
    assert found.size == 3
    assert found.sha256 == "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    assert found.multihash == "1220" + found.sha256
    with pytest.raises(InputError, match="there is no such file"):
        fingerprint(str(tmp_path / "nothing"))


def test_masks_beside_a_raster_belong_to_it(tmp_path: Path) -> None:
    path = painted(tmp_path / "one.tif")
    with rasterio.Env(GDAL_TIFF_INTERNAL_MASK=False), rasterio.open(path, "r+") as dataset:
        dataset.write_mask(np.ones(HERE.shape, dtype=bool))
    assert belonging_files(path) == (path, path + ".msk")


def test_pixels_of_no_size(tmp_path: Path) -> None:
    flat = grid(4, 4)
    path = write(tmp_path / "flat.tif", np.ones((4, 4), dtype=np.uint8),
                 type(flat)(flat.crs, Affine(30, 0, 600_000, 30, 0, 5_300_000), 4, 4))  # fmt: skip
    with pytest.raises(InputError, match="has pixels of no size"):
        describe_raster(path)


def test_an_address_that_does_not_answer() -> None:
    with (
        rasterio.Env(GDAL_HTTP_MAX_RETRY="0"),
        pytest.raises(InputError, match="cannot be fetched, or is not a raster"),
    ):
        open_raster("/vsicurl/http://127.0.0.1:9/b10.tif", indirect=True)
