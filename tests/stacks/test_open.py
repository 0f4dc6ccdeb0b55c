from __future__ import annotations

import logging
import pickle
import struct
from pathlib import Path

import numpy as np
import pytest
import tifffile
import zarr

from hologyre.stacks import StackError, as_stack, fingerprint, open_stack


@pytest.fixture(autouse=True)
def _quiet_reader(caplog: pytest.LogCaptureFixture) -> None:
    caplog.set_level(logging.CRITICAL, logger="tifffile")


def frames(n: int = 5, ny: int = 12, nx: int = 16, dtype: str = "uint8") -> np.ndarray:
    """Noise: reading needs no fringes."""
    values = np.random.default_rng(5).integers(0, 200, (n, ny, nx))
    return values.astype(dtype)


@pytest.mark.parametrize(
    "dtype", ["uint8", "uint16", "int16", "uint32", "float32", "float64", ">u2"]
)
def test_plain_stack_reads_back_in_native_byte_order(tmp_path: Path, dtype: str) -> None:
    values = frames(dtype=dtype)
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, values, byteorder=">" if dtype == ">u2" else None)
    stack = open_stack(path)
    assert stack.dims == ("t", "y", "x")
    assert stack.dtype == np.dtype(dtype).newbyteorder("=")
    np.testing.assert_array_equal(stack.values, values)


@pytest.mark.parametrize("compression", [None, "zlib", "lzw"])
@pytest.mark.parametrize("bigtiff", [False, True])
def test_pages_written_one_by_one_read_back(
    tmp_path: Path, compression: str | None, bigtiff: bool
) -> None:
    values = frames(5)
    path = tmp_path / "a.tif"
    with tifffile.TiffWriter(path, bigtiff=bigtiff) as writer:
        for frame in values:
            writer.write(frame, compression=compression, rowsperstrip=5, metadata=None)
    np.testing.assert_array_equal(open_stack(str(path)).values, values)


def test_stack_is_lazy_one_frame_a_chunk_and_pickles(tmp_path: Path) -> None:
    values = frames()
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, values, compression="zlib", imagej=False)
    stack = open_stack(path)
    assert stack.chunks == ((1,) * 5, (12,), (16,))
    again = pickle.loads(pickle.dumps(stack))
    np.testing.assert_array_equal(again[2].values, values[2])
    np.testing.assert_array_equal(stack[1:3, 2:5, ::2].values, values[1:3, 2:5, ::2])


def test_single_image_is_a_stack_of_one(tmp_path: Path) -> None:
    path = tmp_path / "one.tif"
    tifffile.imwrite(path, frames(1)[0])
    stack = open_stack(path)
    assert stack.shape == (1, 12, 16)
    assert stack.attrs["name"] == "one"
    assert stack.attrs["paths"] == (str(path),)


def test_a_relative_path_is_one_file_with_the_same_fingerprint(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    tifffile.imwrite(tmp_path / "a.ome.tif", frames(3), metadata={"axes": "TYX"})
    monkeypatch.chdir(tmp_path)
    near, far = open_stack("a.ome.tif"), open_stack(tmp_path / "a.ome.tif")
    assert near.attrs["paths"] == ("a.ome.tif",)
    assert fingerprint(near.attrs["paths"]) == fingerprint(far.attrs["paths"])


@pytest.mark.parametrize(
    ("shape", "axes"),
    [((5, 12, 16), "TYX"), ((5, 1, 1, 12, 16), "TZCYX"), ((5, 12, 16), "ZYX"), ((12, 16), "YX")],
)
@pytest.mark.parametrize("kind", ["imagej", "ome"])
def test_trivial_axes_are_dropped_and_the_other_is_time(
    tmp_path: Path, shape: tuple[int, ...], axes: str, kind: str
) -> None:
    values = np.arange(np.prod(shape), dtype="uint16").reshape(shape)
    path = tmp_path / ("a.ome.tif" if kind == "ome" else "a.tif")
    tifffile.imwrite(path, values, **{kind: True}, metadata={"axes": axes})
    stack = open_stack(path)
    np.testing.assert_array_equal(stack.values, values.reshape(-1, 12, 16))
    assert stack.attrs["name"] == "a"


def test_imagej_metadata_gives_pixel_and_interval(tmp_path: Path) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(
        path, frames(), imagej=True, resolution=(1 / 0.25, 1 / 0.25),
        metadata={"axes": "TYX", "unit": "um", "finterval": 0.5},
    )  # fmt: skip
    stack = open_stack(path)
    assert stack.attrs["pixel_um"] == pytest.approx(0.25, rel=1e-6)
    assert stack.attrs["frame_interval_s"] == 0.5


def test_ome_metadata_gives_pixel_and_interval_in_their_units(tmp_path: Path) -> None:
    path = tmp_path / "a.ome.tif"
    tifffile.imwrite(
        path, frames(), ome=True,
        metadata={"axes": "TYX", "PhysicalSizeX": 250.0, "PhysicalSizeXUnit": "nm",
                  "PhysicalSizeY": 250.0, "PhysicalSizeYUnit": "nm",
                  "TimeIncrement": 20.0, "TimeIncrementUnit": "ms"},
    )  # fmt: skip
    stack = open_stack(path)
    assert stack.attrs["pixel_um"] == pytest.approx(0.25)
    assert stack.attrs["frame_interval_s"] == pytest.approx(0.02)


def test_ome_times_of_planes_give_the_interval_and_uneven_ones_are_told(tmp_path: Path) -> None:
    path = tmp_path / "a.ome.tif"
    tifffile.imwrite(
        path, frames(), ome=True,
        metadata={"axes": "TYX", "Plane": {"DeltaT": [0.0, 1.0, 2.0, 3.0, 6.0]}},
    )  # fmt: skip
    stack = open_stack(path)
    assert stack.attrs["frame_interval_s"] == pytest.approx(1.0)
    assert "even intervals" in stack.attrs["notes"][0]


def test_unequal_pixel_sizes_are_not_used_and_told(tmp_path: Path) -> None:
    path = tmp_path / "a.ome.tif"
    tifffile.imwrite(
        path, frames(), ome=True,
        metadata={"axes": "TYX", "PhysicalSizeX": 0.25, "PhysicalSizeY": 0.5},
    )  # fmt: skip
    stack = open_stack(path)
    assert stack.attrs["pixel_um"] is None
    assert "along y (0.5 um) and x (0.25 um)" in stack.attrs["notes"][0]


def test_dots_per_inch_are_not_taken_for_a_pixel_size(tmp_path: Path) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, frames(), resolution=(72, 72), resolutionunit="INCH")
    assert open_stack(path).attrs["pixel_um"] is None


def test_pattern_folder_and_list_join_files_in_natural_order(tmp_path: Path) -> None:
    values = frames(12)
    for n, frame in enumerate(values):
        tifffile.imwrite(tmp_path / f"f{n}.tif", frame)
    for source in (str(tmp_path / "f*.tif"), tmp_path / "f*.tif", tmp_path):
        stack = open_stack(source)
        np.testing.assert_array_equal(stack.values, values)
        assert stack.attrs["name"] == tmp_path.name
    backwards = open_stack([tmp_path / "f3.tif", tmp_path / "f1.tif"])
    np.testing.assert_array_equal(backwards.values, values[[3, 1]])


def test_ome_set_of_files_is_read_from_any_and_counted_once(tmp_path: Path) -> None:
    values = frames(4)
    xml = _ome_set_description()
    for n in range(2):
        tifffile.imwrite(
            tmp_path / f"part{n}.ome.tif", values[2 * n : 2 * n + 2],
            description=xml.replace("THIS", f"u{n}"), metadata=None, photometric="minisblack",
        )  # fmt: skip
    np.testing.assert_array_equal(open_stack(tmp_path / "part0.ome.tif").values, values)
    np.testing.assert_array_equal(open_stack(tmp_path / "part*.ome.tif").values, values)
    (tmp_path / "part1.ome.tif").unlink()
    with pytest.raises(StackError, match=r"part0.*files that are missing"):
        open_stack(tmp_path / "part0.ome.tif")


def _ome_set_description() -> str:
    data = "".join(
        f'<TiffData FirstT="{2 * n + i}" FirstC="0" FirstZ="0" IFD="{i}" PlaneCount="1">'
        f'<UUID FileName="part{n}.ome.tif">urn:uuid:u{n}</UUID></TiffData>'
        for n in range(2)
        for i in range(2)
    )
    return (
        '<?xml version="1.0" encoding="UTF-8"?><OME '
        'xmlns="http://www.openmicroscopy.org/Schemas/OME/2016-06" UUID="urn:uuid:THIS">'
        '<Image ID="Image:0" Name="a"><Pixels ID="Pixels:0" DimensionOrder="XYZCT" '
        'Type="uint8" SizeX="16" SizeY="12" SizeZ="1" SizeC="1" SizeT="4">'
        '<Channel ID="Channel:0:0" SamplesPerPixel="1"/>'
        f"{data}</Pixels></Image></OME>"
    )


@pytest.mark.parametrize("version", [2, 3])
def test_zarr_array_reads_back_one_frame_a_chunk(tmp_path: Path, version: int) -> None:
    values = frames(4, dtype="uint16")
    path = tmp_path / "a.zarr"
    array = zarr.create_array(
        path, shape=values.shape, chunks=(2, 12, 16), dtype="uint16", zarr_format=version
    )
    array[...] = values
    stack = open_stack(path)
    assert stack.chunks[0] == (1,) * 4
    np.testing.assert_array_equal(stack.values, values)


def test_ome_zarr_gives_the_finest_level_with_its_scale(tmp_path: Path) -> None:
    values = frames(3, dtype="uint16")
    group = zarr.create_group(tmp_path / "a.ome.zarr")
    group.create_array("0", data=values.reshape(3, 1, 1, 12, 16))
    axes = [
        {"name": "t", "type": "time", "unit": "millisecond"}, {"name": "c", "type": "channel"},
        {"name": "z", "type": "space", "unit": "micrometer"},
        {"name": "y", "type": "space", "unit": "micrometer"},
        {"name": "x", "type": "space", "unit": "micrometer"},
    ]  # fmt: skip
    scale = [{"type": "scale", "scale": [100.0, 1.0, 1.0, 0.25, 0.25]}]
    datasets = [{"path": "0", "coordinateTransformations": scale}]
    group.attrs["ome"] = {"multiscales": [{"axes": axes, "datasets": datasets}]}
    stack = open_stack(tmp_path / "a.ome.zarr")
    np.testing.assert_array_equal(stack.values, values)
    assert stack.attrs["pixel_um"] == pytest.approx(0.25)
    assert stack.attrs["frame_interval_s"] == pytest.approx(0.1)
    assert stack.attrs["name"] == "a"


def test_zarr_with_several_channels_is_refused(tmp_path: Path) -> None:
    group = zarr.create_group(tmp_path / "a.zarr")
    group.create_array("0", data=np.zeros((2, 12, 16), "uint8"))
    axes = [{"name": name} for name in "cyx"]
    datasets = [{"path": "0"}]
    group.attrs["ome"] = {"multiscales": [{"axes": axes, "datasets": datasets}]}
    with pytest.raises(StackError, match=r"a\.zarr: its shape is \(2, 12, 16\) \(c, y, x\)"):
        open_stack(tmp_path / "a.zarr")


def test_zarr_group_that_is_no_image_is_refused(tmp_path: Path) -> None:
    zarr.create_group(tmp_path / "a.zarr")
    with pytest.raises(StackError, match=r"not an OME-Zarr image"):
        open_stack(tmp_path / "a.zarr")


def test_missing_file_empty_list_and_vain_pattern_are_told(tmp_path: Path) -> None:
    with pytest.raises(StackError, match=r"no\.tif: there is no such file"):
        open_stack(tmp_path / "no.tif")
    with pytest.raises(StackError, match="list of images is empty"):
        open_stack([])
    with pytest.raises(StackError, match="no file matches"):
        open_stack(tmp_path / "*.tif")
    with pytest.raises(StackError, match="holds no TIFF image"):
        open_stack(tmp_path)


def test_empty_file_is_told(tmp_path: Path) -> None:
    (tmp_path / "e.tif").touch()
    with pytest.raises(StackError, match=r"e\.tif: the file is empty \(0 bytes\)"):
        open_stack(tmp_path / "e.tif")


@pytest.mark.parametrize("text", ["frame,y,x\n0,1,2\n", "x", "II*\0"])
def test_file_that_is_no_tiff_is_told(tmp_path: Path, text: str) -> None:
    (tmp_path / "t.tif").write_text(text)
    with pytest.raises(
        StackError, match=r"t\.tif: (this is not a TIFF file|the file is cut short)"
    ):
        open_stack(tmp_path / "t.tif")


@pytest.mark.parametrize("kind", ["contiguous", "imagej", "pages", "zlib", "big", "ome"])
def test_stack_cut_short_anywhere_is_told_when_opened(tmp_path: Path, kind: str) -> None:
    """Whatever the point it was cut at, a frame is never silently missing or garbage."""
    values = frames()
    path = tmp_path / "whole.tif"
    if kind == "contiguous":
        tifffile.imwrite(path, values)
    elif kind in ("imagej", "ome"):
        tifffile.imwrite(path, values, **{kind: True}, metadata={"axes": "TYX"})
    else:
        with tifffile.TiffWriter(path, bigtiff=kind == "big") as writer:
            for frame in values:
                compression = "zlib" if kind == "zlib" else None
                writer.write(frame, compression=compression, metadata=None)
    whole = path.read_bytes()
    np.testing.assert_array_equal(open_stack(path).values, values)
    told = 0
    for length in range(1, len(whole), 23):
        cut = tmp_path / "cut.tif"
        cut.write_bytes(whole[:length])
        told += _is_told(cut, values)
    # the rest lost no more than the description some programs write last
    assert told >= 0.7 * len(range(1, len(whole), 23))


def _is_told(path: Path, values: np.ndarray) -> bool:
    try:
        read = open_stack(path).values
    except StackError as error:
        return str(error).startswith(str(path))
    # only bytes that say nothing of the frames were lost
    np.testing.assert_array_equal(read, values)
    return False


def test_imagej_stack_with_its_last_frames_missing_is_told(tmp_path: Path) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, frames(), imagej=True, metadata={"axes": "TYX"})
    path.write_bytes(path.read_bytes()[:-100])
    with pytest.raises(StackError, match="cut short"):
        open_stack(path)


def test_colour_is_refused_with_the_way_out(tmp_path: Path) -> None:
    path = tmp_path / "rgb.tif"
    tifffile.imwrite(path, np.zeros((3, 12, 16, 3), "uint8"), photometric="rgb")
    with pytest.raises(StackError, match=r"rgb\.tif: holds colour frames \(3 samples .*Split Chan"):
        open_stack(path)


def test_several_channels_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "c.tif"
    tifffile.imwrite(path, np.zeros((3, 2, 12, 16), "uint8"), imagej=True,
                     metadata={"axes": "TCYX"})  # fmt: skip
    with pytest.raises(StackError, match=r"several channels \(3 along time and 2 along channel\)"):
        open_stack(path)


def test_time_and_z_together_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "z.tif"
    tifffile.imwrite(path, np.zeros((3, 2, 12, 16), "uint8"), imagej=True,
                     metadata={"axes": "TZYX"})  # fmt: skip
    with pytest.raises(StackError, match="3 along time and 2 along z where one axis of time"):
        open_stack(path)


def test_frames_of_different_sizes_are_refused(tmp_path: Path) -> None:
    path = tmp_path / "s.tif"
    with tifffile.TiffWriter(path) as writer:
        writer.write(np.zeros((12, 16), "uint8"))
        writer.write(np.zeros((10, 16), "uint8"))
    with pytest.raises(StackError, match=r"different sizes \(12x16, 10x16 px\)"):
        open_stack(path)


def test_files_of_different_sizes_or_types_are_refused(tmp_path: Path) -> None:
    tifffile.imwrite(tmp_path / "1.tif", np.zeros((12, 16), "uint8"))
    tifffile.imwrite(tmp_path / "2.tif", np.zeros((10, 16), "uint8"))
    tifffile.imwrite(tmp_path / "3.tif", np.zeros((12, 16), "uint16"))
    with pytest.raises(StackError, match=r"2\.tif: its frames are 10x16 px and those of 1\.tif"):
        open_stack([tmp_path / "1.tif", tmp_path / "2.tif"])
    with pytest.raises(StackError, match=r"3\.tif: its pixels are uint16 and those of 1\.tif"):
        open_stack([tmp_path / "1.tif", tmp_path / "3.tif"])


def test_complex_pixels_are_refused(tmp_path: Path) -> None:
    tifffile.imwrite(tmp_path / "c.tif", np.zeros((12, 16), "complex64"))
    with pytest.raises(StackError, match="pixels are complex64"):
        open_stack(tmp_path / "c.tif")


def test_frame_lost_after_opening_is_told_when_read(tmp_path: Path) -> None:
    path = tmp_path / "a.tif"
    tifffile.imwrite(path, frames())
    stack = open_stack(path)
    path.write_bytes(path.read_bytes()[:300])
    with pytest.raises(StackError, match=r"a\.tif: a frame could not be read"):
        _ = stack[3].values


def test_bits_come_from_the_file(tmp_path: Path) -> None:
    tifffile.imwrite(tmp_path / "a.tif", frames(dtype="uint16"))
    assert open_stack(tmp_path / "a.tif").attrs["bits"] == 16


@pytest.mark.parametrize("shape", [(12, 16), (3, 12, 16)])
def test_plain_array_becomes_a_stack(shape: tuple[int, ...]) -> None:
    values = np.ones(shape, "float32")
    stack = as_stack(values)
    assert stack.dims == ("t", "y", "x")
    assert stack.shape[-2:] == (12, 16)
    assert as_stack(stack) is stack


@pytest.mark.parametrize("bad", [np.ones(4), np.ones((2, 2), complex), np.ones((0, 4, 4))])
def test_array_that_is_no_stack_is_refused(bad: np.ndarray) -> None:
    with pytest.raises(StackError, match="holograms: expected a"):
        as_stack(bad)


def test_corrupt_first_offset_is_told(tmp_path: Path) -> None:
    (tmp_path / "a.tif").write_bytes(b"II*\0" + struct.pack("<I", 10**6) + b"\0" * 50)
    with pytest.raises(StackError, match="cut short"):
        open_stack(tmp_path / "a.tif")
