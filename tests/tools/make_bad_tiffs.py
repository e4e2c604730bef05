#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Writes the malformed and unsuitable TIFF files of fixtures/images, byte for byte the same each time.

    /usr/bin/python3 tests/tools/make_bad_tiffs.py fixtures/images

Every file is put together by hand from the tags of TIFF 6.0, little-endian, so that each lie is exactly the
one that is meant.
"""
import pathlib
import struct
import sys

SHORT, LONG = 3, 4
WIDTH, HEIGHT = 7, 6


def tiff(pixels, strips, tags=None, bits=16, next_page=0):
    """One page: `pixels` follow the header, `strips` are (offset into pixels, byte count), `tags` override
    the usual ones (None leaves one out)."""
    start = 8
    data = pixels + b"\0" * (len(pixels) % 2)
    usual = {
        256: (LONG, [WIDTH]),
        257: (LONG, [HEIGHT]),
        258: (SHORT, [bits]),
        259: (SHORT, [1]),
        262: (SHORT, [1]),
        273: (LONG, [start + offset if count or offset else 0 for offset, count in strips]),
        277: (SHORT, [1]),
        278: (LONG, [-(-HEIGHT // len(strips))]),
        279: (LONG, [count for _, count in strips]),
    }
    usual.update(tags or {})
    usual = {tag: entry for tag, entry in usual.items() if entry is not None}
    place = start + len(data)
    extra_at = place + 2 + 12 * len(usual) + 4
    extra, entries = b"", b""
    for tag, (kind, values) in sorted(usual.items()):
        raw = struct.pack("<%d%s" % (len(values), "H" if kind == SHORT else "L"), *values)
        if len(raw) > 4:
            field = struct.pack("<L", extra_at + len(extra))
            extra += raw
        else:
            field = raw.ljust(4, b"\0")
        entries += struct.pack("<HHL", tag, kind, len(values)) + field
    follow = place if next_page == "itself" else next_page
    return (b"II*\0" + struct.pack("<L", place) + data + struct.pack("<H", len(usual)) + entries +
            struct.pack("<L", follow) + extra)


def counts(bytes_a_pixel=2):
    """A ramp, so that no strip looks like another."""
    return bytes((37 * k + 11) % 251 for k in range(WIDTH * HEIGHT * bytes_a_pixel))


def whole(bytes_a_pixel=2):
    """Two strips of three rows each."""
    half = WIDTH * HEIGHT * bytes_a_pixel // 2
    return [(0, half), (half, half)]


def floats(value):
    values = [2.385 + 0.1 * k for k in range(WIDTH * HEIGHT)]
    values[WIDTH * 3 + 4] = value
    return struct.pack("<%df" % len(values), *values)


def files():
    good = tiff(counts(), whole())
    two = whole()
    yield "empty.tif", b""
    yield "text.tif", b"near,wide\nnear_01.tif,wide_01.tif\n"
    yield "cut-in-header.tif", good[:-40]
    yield "cut-after-header.tif", b"II*\0" + good[4:8] + b"\x21\x43"
    yield "strip-beyond-end.tif", tiff(counts(), [two[0], (100000, two[1][1])])
    yield "strip-count-too-large.tif", tiff(counts(), [two[0], (two[1][0], 4000000000)])
    yield "strip-count-too-small.tif", tiff(counts(), [two[0], (two[1][0], 5)])
    yield "strip-missing.tif", tiff(counts(), two, {273: (LONG, [8]), 279: (LONG, [42])})
    yield "sparse-strip.tif", tiff(counts(), [two[0], (0, 0)])
    yield "huge-claim.tif", tiff(counts()[:20], [(0, 20)], {256: (LONG, [100000]), 257: (LONG, [100000]),
                                                            278: (LONG, [100000])})
    yield "huge-tile.tif", tiff(counts(), [(0, 84)], {273: None, 278: None, 279: None,
                                                      322: (LONG, [65520]), 323: (LONG, [65520]),
                                                      324: (LONG, [8]), 325: (LONG, [84])})
    yield "no-width.tif", tiff(counts(), two, {256: None})
    yield "page-loop.tif", tiff(counts(), two, next_page="itself")
    yield "page-nowhere.tif", tiff(counts(), two, next_page=1000000)
    yield "deflate-garbage.tif", tiff(counts(), two, {259: (SHORT, [8])})
    yield "lzw-garbage.tif", tiff(b"\xff" * 84, two, {259: (SHORT, [5])})
    yield "jpeg.tif", tiff(counts(1), whole(1), {259: (SHORT, [7])}, bits=8)
    yield "rgb.tif", tiff(counts(3), whole(3), {258: (SHORT, [8, 8, 8]), 262: (SHORT, [2]),
                                                277: (SHORT, [3])})
    yield "palette.tif", tiff(counts(1), whole(1), {262: (SHORT, [3]), 320: (SHORT, [257 * (k % 256) for k in
                                                                                     range(768)])}, bits=8)
    yield "two-samples.tif", tiff(counts(4), whole(4), {258: (SHORT, [16, 16]), 277: (SHORT, [2]),
                                                        338: (SHORT, [0])})
    yield "white-is-zero.tif", tiff(counts(), two, {262: (SHORT, [0])})
    yield "turned.tif", tiff(counts(), two, {274: (SHORT, [6])})
    yield "one-bit.tif", tiff(b"\x5a" * HEIGHT, [(0, HEIGHT)], bits=1)
    yield "signed-16.tif", tiff(counts(), two, {339: (SHORT, [2])})
    yield "unsigned-32.tif", tiff(counts(4), whole(4), bits=32)
    yield "float-64.tif", tiff(counts(8), whole(8), {339: (SHORT, [3])}, bits=64)
    yield "complex-64.tif", tiff(counts(8), whole(8), {339: (SHORT, [6])}, bits=64)
    yield "not-a-number.tif", tiff(floats(float("nan")), whole(4), {339: (SHORT, [3])}, bits=32)
    yield "infinite.tif", tiff(floats(float("-inf")), whole(4), {339: (SHORT, [3])}, bits=32)


def main():
    if len(sys.argv) != 2:
        sys.exit("usage: make_bad_tiffs.py FOLDER")
    folder = pathlib.Path(sys.argv[1])
    folder.mkdir(parents=True, exist_ok=True)
    for name, content in files():
        (folder / name).write_bytes(content)


if __name__ == "__main__":
    main()
