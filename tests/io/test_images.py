# SPDX-License-Identifier: GPL-3.0-or-later
"""Images in and out against other programs' files: what tifffile and libtiff write must be read exactly, and
what is written here must be read exactly by tifffile, libtiff and Pillow.

The library under test is loaded from UF_PROBE (default build/probe/libunderfoot.so).
"""
import ctypes
import io
import os
import pathlib
import subprocess
import sys
import zlib

import numpy
import PIL.Image
import pytest
import tifffile

ROOT = pathlib.Path(__file__).resolve().parents[2]
PROBE = ctypes.CDLL(str(ROOT / os.environ.get("UF_PROBE", "build/probe/libunderfoot.so")))
LIBTIFF = ctypes.CDLL("libtiff.so.6")

UF_OK, UF_INPUT = 0, 2
NONE, LZW, DEFLATE, OLD_DEFLATE, PACKBITS, LZMA, ZSTD = 1, 5, 8, 32946, 32773, 34925, 50000
JPEG, LERC, WEBP, CCITT_G4, PIXARLOG = 7, 34887, 50001, 4, 32909
CODECS = [NONE, LZW, DEFLATE, OLD_DEFLATE, PACKBITS, LZMA, ZSTD]


# ---- the library under test ------------------------------------------------------------------------


class Work(ctypes.Structure):
    _fields_ = [("first", ctypes.c_void_p), ("current", ctypes.c_void_p), ("pool", ctypes.c_void_p)]


class Plane(ctypes.Structure):
    _fields_ = [("data", ctypes.c_void_p), ("width", ctypes.c_int), ("height", ctypes.c_int),
                ("stride", ctypes.c_ssize_t)]


class Labels(ctypes.Structure):
    _fields_ = Plane._fields_ + [("count", ctypes.c_int)]


class Indexed(ctypes.Structure):
    _fields_ = [("data", ctypes.c_void_p), ("width", ctypes.c_int), ("height", ctypes.c_int),
                ("palette", ctypes.c_uint8 * 768), ("colours", ctypes.c_int)]


class Info(ctypes.Structure):
    _fields_ = [("width", ctypes.c_int), ("height", ctypes.c_int), ("pages", ctypes.c_int),
                ("bits", ctypes.c_int), ("is_float", ctypes.c_int), ("pixel_size_x_um", ctypes.c_double),
                ("pixel_size_y_um", ctypes.c_double), ("file_bytes", ctypes.c_uint64),
                ("fingerprint", ctypes.c_uint64)]


class Error(ctypes.Structure):
    _fields_ = [("status", ctypes.c_int), ("text", ctypes.c_char * 1024)]


class Text(ctypes.Structure):
    _fields_ = [("bytes", ctypes.c_void_p), ("length", ctypes.c_size_t), ("capacity", ctypes.c_size_t),
                ("failed", ctypes.c_bool)]


def read(path, page=0):
    """The status, the pixels (float32), the info and the error line."""
    work, plane, info, error = Work(), Plane(), Info(), Error()
    status = PROBE.uf_image_read(ctypes.byref(work), os.fsencode(path), page, None, ctypes.byref(plane),
                                 ctypes.byref(info), ctypes.byref(error))
    pixels = None
    if status == UF_OK:
        count = plane.height * plane.stride
        flat = numpy.ctypeslib.as_array(ctypes.cast(plane.data, ctypes.POINTER(ctypes.c_float)), (count,))
        pixels = flat.reshape(plane.height, plane.stride)[:, :plane.width].copy()
    PROBE.uf_arena_free(ctypes.byref(work))
    return status, pixels, info, error.text.decode()


def must_read(path, expected, page=0):
    status, pixels, info, text = read(path, page)
    assert status == UF_OK, text
    assert (info.width, info.height) == expected.shape[::-1]
    assert info.bits == expected.dtype.itemsize * 8
    assert bool(info.is_float) == (expected.dtype.kind == "f")
    numpy.testing.assert_array_equal(pixels, expected.astype(numpy.float32))
    return info


def must_refuse(path, *words, page=0):
    status, _, _, text = read(path, page)
    assert status == UF_INPUT
    for word in words:
        assert word in text


def encode(function, image, *arguments):
    text, error = Text(), Error()
    status = function(ctypes.byref(text), image, *arguments, ctypes.byref(error))
    assert status == UF_OK, error.text
    content = ctypes.string_at(text.bytes, text.length)
    PROBE.uf_text_free(ctypes.byref(text))
    return content


# ---- libtiff as another writer ---------------------------------------------------------------------

LIBTIFF.TIFFOpen.restype = ctypes.c_void_p
LIBTIFF.TIFFWriteEncodedStrip.restype = ctypes.c_ssize_t
LIBTIFF.TIFFWriteEncodedTile.restype = ctypes.c_ssize_t
LIBTIFF.TIFFWriteRawStrip.restype = ctypes.c_ssize_t


def set_tag(tiff, tag, *values):
    assert LIBTIFF.TIFFSetField(tiff, tag, *values) == 1, tag


def write_strips(tiff, image, rows):
    set_tag(tiff, 278, ctypes.c_uint32(rows))
    for strip, y in enumerate(range(0, image.shape[0], rows)):
        content = image[y:y + rows].tobytes()
        written = LIBTIFF.TIFFWriteEncodedStrip(tiff, strip, content, ctypes.c_ssize_t(len(content)))
        assert written == len(content)


def write_tiles(tiff, image, tile):
    width, height = tile
    set_tag(tiff, 322, ctypes.c_uint32(width))
    set_tag(tiff, 323, ctypes.c_uint32(height))
    number = 0
    for y in range(0, image.shape[0], height):
        for x in range(0, image.shape[1], width):
            part = numpy.full((height, width), 255, image.dtype)  # padding that must not be seen
            piece = image[y:y + height, x:x + width]
            part[:piece.shape[0], :piece.shape[1]] = piece
            content = part.tobytes()
            written = LIBTIFF.TIFFWriteEncodedTile(tiff, number, content, ctypes.c_ssize_t(len(content)))
            assert written == len(content)
            number += 1


def floating_point_predictor(image):
    """Adobe Photoshop TIFF Technical Note 3: a row's bytes, most significant first whatever the order of the
    file, one plane of bytes after the other, then differences."""
    height, width = image.shape
    planes = image.astype(">f4").view(numpy.uint8).reshape(height, width, 4).transpose(0, 2, 1)
    planes = planes.reshape(height, -1)
    differences = planes.copy()
    differences[:, 1:] -= planes[:, :-1]
    return differences.tobytes()


def write_raw_strip(path, image, content, codec, predictor, mode):
    tiff = ctypes.c_void_p(LIBTIFF.TIFFOpen(os.fsencode(path), mode.encode()))
    for tag, value in ((256, image.shape[1]), (257, image.shape[0]), (258, 32), (277, 1), (262, 1), (339, 3),
                       (259, codec), (317, predictor), (278, image.shape[0])):
        set_tag(tiff, tag, value)
    assert LIBTIFF.TIFFWriteRawStrip(tiff, 0, content, ctypes.c_ssize_t(len(content))) == len(content)
    LIBTIFF.TIFFClose(tiff)


def write_libtiff(path, pages, codec=NONE, predictor=1, mode="wl", rows=None, tile=None):
    tiff = ctypes.c_void_p(LIBTIFF.TIFFOpen(os.fsencode(path), mode.encode()))
    assert tiff.value
    for image in pages:
        set_tag(tiff, 256, ctypes.c_uint32(image.shape[1]))
        set_tag(tiff, 257, ctypes.c_uint32(image.shape[0]))
        set_tag(tiff, 258, image.dtype.itemsize * 8)
        set_tag(tiff, 277, 1)
        set_tag(tiff, 262, 1)
        set_tag(tiff, 339, 3 if image.dtype.kind == "f" else 1)
        set_tag(tiff, 259, codec)
        if predictor != 1:
            set_tag(tiff, 317, predictor)
        if tile:
            write_tiles(tiff, image, tile)
        else:
            write_strips(tiff, image, rows or image.shape[0])
        assert LIBTIFF.TIFFWriteDirectory(tiff) == 1
    LIBTIFF.TIFFClose(tiff)


def image_of(dtype, height, width, seed=0):
    """Smooth enough for every codec to find something, with noise on top and both ends of the range."""
    random = numpy.random.default_rng(seed)
    y, x = numpy.mgrid[:height, :width]
    smooth = 0.5 + 0.3 * numpy.sin(x / 5.3) * numpy.cos(y / 3.7) + random.normal(0, 0.02, (height, width))
    if numpy.dtype(dtype).kind == "f":
        return (smooth * 2385.7 - 1000).astype(dtype)
    top = numpy.iinfo(dtype).max
    image = numpy.clip(smooth * top, 0, top).astype(dtype)
    image.flat[0], image.flat[-1] = top, 0
    return image


DTYPES = ["uint8", "uint16", "float32"]
SIZES = [(1, 1), (1, 509), (509, 1), (131, 257), (64, 48)]


# ---- reading, against tifffile -----------------------------------------------------------------------


@pytest.mark.parametrize("byteorder", ["<", ">"])
@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("dtype", DTYPES)
@pytest.mark.parametrize("layout", [{}, {"rowsperstrip": 7}, {"tile": (32, 16)}, {"bigtiff": True},
                                    {"compression": "zlib"}, {"compression": "zlib", "tile": (16, 48)}])
def test_reads_tifffile(tmp_path, dtype, size, byteorder, layout):
    image = image_of(dtype, *size)
    tifffile.imwrite(tmp_path / "a.tif", image, byteorder=byteorder, photometric="minisblack", **layout)
    info = must_read(tmp_path / "a.tif", image)
    assert info.pages == 1


def test_reads_pages_of_tifffile(tmp_path):
    pages = [image_of("uint16", 37, 53, seed) for seed in range(5)]
    tifffile.imwrite(tmp_path / "a.tif", numpy.stack(pages), photometric="minisblack")
    for number, page in enumerate(pages):
        assert must_read(tmp_path / "a.tif", page, number).pages == 5
    must_refuse(tmp_path / "a.tif", "has 5 pages, page 6 was asked for", page=5)


def test_reads_ome_tiff(tmp_path):
    image = image_of("uint16", 61, 43)
    tifffile.imwrite(tmp_path / "a.ome.tif", image, ome=True, photometric="minisblack",
                     metadata={"axes": "YX", "PhysicalSizeX": 0.1083})
    must_read(tmp_path / "a.ome.tif", image)


def test_reads_12_bits_in_16(tmp_path):
    image = image_of("uint16", 53, 31) >> 4
    tifffile.imwrite(tmp_path / "a.tif", image, photometric="minisblack")
    must_read(tmp_path / "a.tif", image)


# ---- reading, against libtiff ------------------------------------------------------------------------


def predictors(dtype, codec):
    if codec in (NONE, PACKBITS):
        return [1]
    return [1, 3] if numpy.dtype(dtype).kind == "f" else [1, 2]


# libtiff 4.5.0 writes predictor 3 wrongly into big-endian files; the next test does that by the book.
CASES = [(dtype, codec, predictor, mode) for dtype in DTYPES for codec in CODECS
         for predictor in predictors(dtype, codec) for mode in ("wl", "wb", "wl8", "wb8")
         if not (predictor == 3 and "b" in mode)]


@pytest.mark.parametrize("dtype,codec,predictor,mode", CASES)
def test_reads_libtiff(tmp_path, dtype, codec, predictor, mode):
    assert LIBTIFF.TIFFIsCODECConfigured(codec)
    for number, (height, width) in enumerate(SIZES):
        image = image_of(dtype, height, width)
        for layout in ({}, {"rows": 13}, {"tile": (32, 16)}):
            path = tmp_path / f"{number}.tif"
            write_libtiff(path, [image], codec, predictor, mode, **layout)
            must_read(path, image)


@pytest.mark.parametrize("mode", ["wl", "wb", "wb8"])
def test_reads_the_floating_point_predictor_by_the_book(tmp_path, mode):
    for size in SIZES:
        image = image_of("float32", *size)
        content = zlib.compress(floating_point_predictor(image))
        write_raw_strip(tmp_path / "a.tif", image, content, DEFLATE, 3, mode)
        must_read(tmp_path / "a.tif", image)


def test_reads_pages_of_different_kinds(tmp_path):
    pages = [image_of("uint16", 11, 13), image_of("float32", 7, 29), image_of("uint8", 31, 5)]
    write_libtiff(tmp_path / "a.tif", pages, LZW)
    for number, page in enumerate(pages):
        must_read(tmp_path / "a.tif", page, number)


@pytest.mark.parametrize("codec", CODECS)
@pytest.mark.parametrize("value", [0, 255])
def test_best_compressed_images_are_not_called_lies(tmp_path, codec, value):
    """Flat images reach each codec's best ratio; the bound on it must let them through."""
    image = numpy.full((2048, 2048), value, numpy.uint8)
    write_libtiff(tmp_path / "a.tif", [image], codec)
    must_read(tmp_path / "a.tif", image)


@pytest.mark.parametrize("codec", [JPEG, LERC, WEBP, CCITT_G4, PIXARLOG])
def test_refuses_other_codecs(tmp_path, codec):
    """The codec is looked at before the pixels: the tag alone is enough."""
    write_libtiff(tmp_path / "a.tif", [image_of("uint8", 32, 32)])
    content = bytearray((tmp_path / "a.tif").read_bytes())
    entry = content.index(b"\x03\x01\x03\x00\x01\x00\x00\x00")
    content[entry + 8:entry + 10] = codec.to_bytes(2, "little")
    (tmp_path / "a.tif").write_bytes(content)
    must_refuse(tmp_path / "a.tif", f"(scheme {codec}), expected none, LZW")


def test_refuses_truncated_files(tmp_path):
    """A compressed strip that ends early is an error in every codec, never a black stripe. (Uncompressed,
    libtiff works the count out itself from the size of the image.)"""
    for codec in CODECS[1:]:
        write_libtiff(tmp_path / "a.tif", [image_of("uint16", 64, 64)], codec, rows=16)
        content = bytearray((tmp_path / "a.tif").read_bytes())
        with tifffile.TiffFile(tmp_path / "a.tif") as tiff:
            tag = tiff.pages[0].tags["StripByteCounts"]
            assert tag.count == 4
            size = 2 if tag.dtype == 3 else 4
            place, count = tag.valueoffset + size, tag.value[1]
        content[place:place + size] = (count // 2).to_bytes(size, "little")
        (tmp_path / "a.tif").write_bytes(content)
        must_refuse(tmp_path / "a.tif", "page 1: ", "the file is damaged")


# ---- pixel size --------------------------------------------------------------------------------------

# TIFF 6.0, section 8: ResolutionUnit 2 is inch, 3 centimetre; both resolutions are pixels per unit.


@pytest.mark.parametrize("unit,resolution,size_um", [
    (3, ((10000000, 1083), (10000, 13)), (1.083, 13)),
    (3, ((100000000, 1083), (100000000, 1083)), (0.1083, 0.1083)),
    (2, ((254000000, 645), (2540000, 13)), (0.0645, 0.13)),
    (3, ((100000, 199), (100000, 201)), (19.9, None)),
    (1, ((100000000, 1083), (100000000, 1083)), (None, None)),
    (2, (1, 1), (None, None)),
    (2, (72, 72), (None, None)),
    (2, (300, 300), (None, None)),
    (3, (1, 1), (None, None)),
    (3, ((0, 1), (200000000, 1)), (None, None)),
])
def test_pixel_size(tmp_path, unit, resolution, size_um):
    tifffile.imwrite(tmp_path / "a.tif", image_of("uint8", 3, 5), photometric="minisblack",
                     resolution=resolution, resolutionunit=unit)
    info = must_read(tmp_path / "a.tif", image_of("uint8", 3, 5))
    for found, expected in zip((info.pixel_size_x_um, info.pixel_size_y_um), size_um):
        if expected is None:
            assert numpy.isnan(found)
        else:
            assert found == expected


def test_no_resolution_says_nothing(tmp_path):
    write_libtiff(tmp_path / "a.tif", [image_of("uint8", 3, 5)])
    assert numpy.isnan(read(tmp_path / "a.tif")[2].pixel_size_x_um)


# ---- what the file is ----------------------------------------------------------------------------------


def test_fingerprint_depends_on_every_byte(tmp_path):
    """A changed pixel changes it; the same bytes under another name do not."""
    image = image_of("uint16", 600, 1024)  # longer than the buffer it is read through
    tifffile.imwrite(tmp_path / "a.tif", image)
    content = bytearray((tmp_path / "a.tif").read_bytes())
    (tmp_path / "b.tif").write_bytes(content)
    first, second = read(tmp_path / "a.tif")[2], read(tmp_path / "b.tif")[2]
    assert first.fingerprint == second.fingerprint and first.file_bytes == len(content)
    content[-1] ^= 1
    (tmp_path / "b.tif").write_bytes(content)
    assert read(tmp_path / "b.tif")[2].fingerprint != first.fingerprint


def test_prints_nothing():
    """libtiff's default handlers print; ours must be in force for every bad file."""
    script = ("import sys; sys.path.insert(0, sys.argv[1]); import test_images, pathlib\n"
              "for p in sorted(pathlib.Path(sys.argv[2]).glob('*.tif')): test_images.read(p)\n"
              "print('end')")
    done = subprocess.run([sys.executable, "-B", "-c", script, str(pathlib.Path(__file__).parent),
                           str(ROOT / "fixtures/images")], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stdout, done.stderr) == (0, "end\n", "")


def test_fixtures_are_what_the_script_makes(tmp_path):
    subprocess.run([sys.executable, str(ROOT / "tests/tools/make_bad_tiffs.py"), str(tmp_path)], check=True)
    made = {p.name: p.read_bytes() for p in tmp_path.iterdir()}
    kept = {p.name: p.read_bytes() for p in (ROOT / "fixtures/images").glob("*.tif")}
    assert made == kept


# ---- writing -------------------------------------------------------------------------------------------


def plane_of(array):
    """A view with a stride, so that rows are not taken for one run of memory."""
    wide = numpy.full((array.shape[0], array.shape[1] + 3), -7, array.dtype)
    wide[:, :array.shape[1]] = array
    return wide, Plane(wide.ctypes.data, array.shape[1], array.shape[0], wide.shape[1])


@pytest.mark.parametrize("size", SIZES + [(5, 30011)])
def test_float_tiff_is_read_by_tifffile_and_libtiff(tmp_path, size):
    array = image_of("float32", *size)
    array[array > 800] = numpy.nan
    keep, plane = plane_of(array)
    content = encode(PROBE.uf_encode_float_tiff, plane, ctypes.c_double(0.1083), b"gap, nm")
    assert content == encode(PROBE.uf_encode_float_tiff, plane, ctypes.c_double(0.1083), b"gap, nm")
    (tmp_path / "a.tif").write_bytes(content)
    with tifffile.TiffFile(tmp_path / "a.tif") as tiff:
        page = tiff.pages[0]
        assert page.dtype == numpy.float32 and page.tags["ImageDescription"].value == "gap, nm"
        assert page.tags["Software"].value == "Underfoot" and "DateTime" not in page.tags
        assert page.tags["ResolutionUnit"].value == 3
        per_cm = page.tags["XResolution"].value
        assert 1e4 * per_cm[1] / per_cm[0] == pytest.approx(0.1083, rel=1e-6)
        numpy.testing.assert_array_equal(page.asarray(), array)
    numpy.testing.assert_array_equal(numpy.asarray(PIL.Image.open(tmp_path / "a.tif")), array)
    del keep


@pytest.mark.parametrize("count,dtype", [(3, "uint16"), (65535, "uint16"), (65536, "uint32")])
def test_label_tiff_is_read_by_tifffile(tmp_path, count, dtype):
    array = numpy.zeros((67, 91), numpy.int32)
    array[5:20, 7:40] = 1
    array[30:60, 50:80] = count
    keep, view = plane_of(array)
    labels = Labels(view.data, view.width, view.height, view.stride, count)
    content = encode(PROBE.uf_encode_label_tiff, labels, ctypes.c_double(float("nan")), None)
    with tifffile.TiffFile(io.BytesIO(content)) as tiff:
        assert tiff.pages[0].dtype == dtype and "XResolution" not in tiff.pages[0].tags
        numpy.testing.assert_array_equal(tiff.pages[0].asarray(), array)
    del keep


def test_count_tiff_is_read_by_tifffile():
    """Values are rounded to the nearest count, at both ends of the range too."""
    array = numpy.float32([[0, 0.4, 0.6, -0.4], [2384.7, 65535, 65535.4, 65534.5]])
    keep, plane = plane_of(array)
    content = encode(PROBE.uf_encode_count_tiff, plane, ctypes.c_double(0.1), b"near")
    numpy.testing.assert_array_equal(tifffile.imread(io.BytesIO(content)),
                                     [[0, 0, 1, 0], [2385, 65535, 65535, 65534]])
    del keep


@pytest.mark.parametrize("size,colours", [((1, 1), 1), ((61, 127), 17), ((127, 3), 256)])
def test_indexed_png_is_read_by_pillow(size, colours):
    random = numpy.random.default_rng(colours)
    pixels = random.integers(0, colours, size, dtype=numpy.uint8)
    palette = random.integers(0, 256, (256, 3), dtype=numpy.uint8)
    image = Indexed(pixels.ctypes.data, size[1], size[0], (ctypes.c_uint8 * 768)(*palette.ravel().tolist()),
                    colours)
    content = encode(PROBE.uf_encode_indexed_png, ctypes.byref(image))
    assert content == encode(PROBE.uf_encode_indexed_png, ctypes.byref(image))
    read_back = PIL.Image.open(io.BytesIO(content))
    assert read_back.mode == "P"
    numpy.testing.assert_array_equal(numpy.asarray(read_back), pixels)
    numpy.testing.assert_array_equal(numpy.asarray(read_back.convert("RGB")), palette[pixels])
