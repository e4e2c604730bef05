# SPDX-License-Identifier: GPL-3.0-or-later
"""Overlay and outlines against the other results, by a second renderer that shares no code with the first.

What a picture should show is worked out here from the label image, the gap map, cells.csv and the panel origins in the
outlines file; what it does show is read back from the PNG by colour, never by palette index. Numbers on the page are
read letter by letter (the letters' shapes come from src/report/font_data.c, which is data).
"""
import csv
import json
import os
import re

import numpy
import PIL.Image
import pytest
import scipy.ndimage
import tifffile

from conftest import ROOT, Run, measure_arguments, tree

PIXEL_UM = 0.11  # of the demo
BLOCK = numpy.ones((3, 3), bool)

# ---- colour ------------------------------------------------------------------------------------------------


def linear(rgb):
    """IEC 61966-2-1."""
    value = numpy.asarray(rgb, float) / 255
    return numpy.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def luminance(rgb):
    return linear(rgb) @ [0.2126, 0.7152, 0.0722]


def oklab_of_linear(light):
    """B. Ottosson, 2020."""
    lms = light @ numpy.array([[0.4122214708, 0.2119034982, 0.0883024619], [0.5363325363, 0.6806995451, 0.2817188376],
                               [0.0514459929, 0.1073969566, 0.6299787005]])
    return numpy.cbrt(numpy.maximum(lms, 0)) @ numpy.array([
        [0.2104542553, 1.9779984951, 0.0259040371], [0.7936177850, -2.4285922050, 0.7827717662],
        [-0.0040720468, 0.4505937099, -0.8086757660]])


def oklab(rgb):
    return oklab_of_linear(linear(rgb))


def dichromat(rgb, who):
    """Vienot, Brettel and Mollon 1999, Color Res. Appl. 24:243, in linear light; values from memory. Colours are
    first drawn in a little, as there."""
    share = {"protan": (0.11238, 0.88762, 0.00401), "deutan": (0.29275, 0.70725, -0.02234)}[who]
    a, b, c = share
    seen = numpy.array([[a, b, 0], [a, b, 0], [c, -c, 1]])
    return numpy.clip((0.992052 * linear(rgb) + 0.003974) @ seen.T, 0, 1)


def chroma_and_hue(rgb):
    lab = oklab(rgb)
    return numpy.hypot(lab[..., 1], lab[..., 2]), numpy.degrees(numpy.arctan2(lab[..., 2], lab[..., 1])) % 360


def is_outline(rgb):
    """Orange, as src/report/palette.h says."""
    chroma, hue = chroma_and_hue(rgb)
    return (chroma > 0.14) & (abs(hue - 55) < 6) & (abs(oklab(rgb)[..., 0] - 0.74) < 0.03)


def is_spot(rgb):
    chroma, hue = chroma_and_hue(rgb)
    return (chroma > 0.15) & (abs(hue - 108) < 6)


def is_cutoff(rgb):
    chroma, hue = chroma_and_hue(rgb)
    return (chroma > 0.15) & (abs(hue - 30) < 6)


def is_grey(rgb):
    return (rgb[..., 0] == rgb[..., 1]) & (rgb[..., 1] == rgb[..., 2])


# ---- letters -------------------------------------------------------------------------------------------------


def read_letters():
    """Character -> (left, top, advance, levels) of the small face."""
    with open(os.path.join(ROOT, "src/report/font_data.c")) as file:
        text = file.read()
    words = re.search(r"small_pixels\[\] = \{(.*?)\};", text, re.S).group(1)
    levels = [int(digit, 16) for word in re.findall(r"0x([0-9a-f]{8})", words) for digit in word]
    letters = {}
    for entry in re.findall(r"\{([-\d, ]+)\}", re.search(r"small_glyphs\[\] = \{(.*?)\};", text, re.S).group(1)):
        code, first, width, height, left, top, advance = map(int, entry.split(","))
        letters[chr(code)] = left, top, advance, numpy.array(levels[first:first + width * height]).reshape(height, width)
    return letters


LETTERS = read_letters()


def ink_levels(rgb):
    """0 on the page to 7 on the darkest text, as the font counts."""
    page, text = oklab(numpy.array([255, 255, 255]))[0], oklab(numpy.array([26, 26, 26]))[0]
    return numpy.rint(7 * (page - oklab(rgb)[..., 0]) / (page - text)).astype(int)


def read_from(levels, x, baseline, alphabet):
    """The text that starts at pen position x: letter by letter the one with most ink that is there exactly."""
    text = ""
    while True:
        fits = []
        for character in alphabet:
            left, top, advance, glyph = LETTERS[character]
            y0, x0 = baseline - top, x + left
            if glyph.size and numpy.array_equal(levels[y0:y0 + glyph.shape[0], x0:x0 + glyph.shape[1]], glyph):
                fits.append((glyph.sum(), character, advance))
        if not fits:
            blank = not levels[baseline - 9:baseline, x:x + 4].any()
            if text and blank and not text.endswith(" "):
                text, x = text + " ", x + LETTERS[" "][2]
                continue
            return text.strip()
        _, character, advance = max(fits)
        text, x = text + character, x + advance


def read_near(levels, xs, baselines, alphabet):
    """The longest text that starts in a small neighbourhood."""
    return max((read_from(levels, x, y, alphabet) for y in baselines for x in xs), key=len)


# ---- one picture and what belongs to it ----------------------------------------------------------------------


class Page:
    def __init__(self, folder, name):
        with PIL.Image.open(f"{folder}/overlay/{name}.png") as image:
            self.mode, self.colours = image.mode, numpy.array(image.getpalette()).reshape(-1, 3)
            self.indices, self.rgb = numpy.array(image), numpy.array(image.convert("RGB"))
        with open(f"{folder}/outlines/{name}.json") as file:
            self.outlines = json.load(file)
        with open(f"{folder}/cells.csv", newline="") as file:
            self.cells = list(csv.DictReader(file))
        self.labels = tifffile.imread(f"{folder}/labels/{name}.tif").astype(int)
        self.gap = tifffile.imread(f"{folder}/gap/{name}.tif")
        self.reduction = self.outlines["panels"]["reduction"]

    def panel(self, which):
        panels = self.outlines["panels"]
        x, y = panels[which]["x"], panels[which]["y"]
        return self.rgb[y:y + panels["height"], x:x + panels["width"]]

    def numbers(self, hatched=False):
        """Cell numbers and their halos, a pixel too wide: greys in the gap panel other than the greys that the legend
        explains. The commonest of them is the ground; when there is hatching, its lines are the next."""
        gap = self.panel("gap")
        grey = numpy.where(is_grey(gap), gap[..., 0].astype(int), -1)
        explained = numpy.argsort(numpy.bincount(grey[grey >= 0]))[-2 if hatched else -1:]
        return scipy.ndimage.binary_dilation((grey >= 0) & ~numpy.isin(grey, explained), BLOCK)

    def shown_labels(self):
        """Labels at the middle of each panel pixel: exact at 1:1, half an image pixel off at 2:1."""
        return self.labels[::self.reduction, ::self.reduction]


def boundary(labels):
    """Pixels of cells with another cell, or none, beside them; the image's edge is no boundary."""
    on = numpy.zeros(labels.shape, bool)
    for a, b in ((numpy.s_[1:, :], numpy.s_[:-1, :]), (numpy.s_[:, 1:], numpy.s_[:, :-1])):
        on[a] |= labels[a] != labels[b]
        on[b] |= labels[a] != labels[b]
    return on & (labels > 0)


def mosaic(demo, channel, height, width, kind="field"):
    """The demo's four fields side by side, again and again."""
    if kind == "flat":
        tile = tifffile.imread(f"{demo}/day1_flat_{channel}.tif")
        tile = numpy.block([[tile, tile], [tile, tile]])
    else:
        a, b, c, d = (tifffile.imread(f"{demo}/day1_{field}_{channel}.tif") for field in "abcd")
        tile = numpy.block([[a, b], [c, d]])
    times = -(-height // tile.shape[0]), -(-width // tile.shape[1])
    return numpy.tile(tile, times)[:height, :width]


def measure_mosaic(demo, folder, size, overlay="yes", cutoff=50):
    for channel in ("near", "wide"):
        tifffile.imwrite(folder / f"day1_m_{channel}.tif", mosaic(demo, channel, *size))
        tifffile.imwrite(folder / f"day1_flat_{channel}.tif", mosaic(demo, channel, *size, kind="flat"))
    with open(f"{demo}/day1.ini") as file:
        (folder / "day1.ini").write_text(file.read())
    (folder / "assay.ini").write_text(f"[contact]\ncutoff_nm = {cutoff}\n[output]\noverlay = {overlay}\nmaps = yes\n")
    run = Run(measure_arguments(folder, folder / "out", "m"))
    assert run.status == 0, run.err
    return Page(folder / "out", "day1_m_near")


# height, width, overlay, cutoff -> reduction: 1:1 up to 1024 px and with overlay = full, 2:1 above
MADE = {
    "300 x 700": ((300, 700), "yes", 80, 1),
    "1024": ((1024, 1024), "yes", 50, 1),
    "1025 high": ((1025, 640), "yes", 50, 2),
    "1031 wide, odd": ((777, 1031), "yes", 37.5, 2),
    "2048": ((2048, 2048), "yes", 50, 2),
    "1500, full": ((1500, 1100), "full", 30, 1),
}
NAMES = ["a", "b", "c", "d", *MADE]


@pytest.fixture(scope="module")
def pages(demo, results, tmp_path_factory):
    made = {field: Page(results[field], f"day1_{field}_near") for field in "abcd"}
    for name, (size, overlay, cutoff, _) in MADE.items():
        made[name] = measure_mosaic(demo, tmp_path_factory.mktemp("mosaic"), size, overlay, cutoff)
    return made


@pytest.fixture(params=NAMES)
def page(pages, request):
    pages[request.param].cutoff = MADE[request.param][2] if request.param in MADE else 50
    return pages[request.param]


# ---- sizes and panels ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_panels_are_1_to_1_up_to_1024_px_and_2_to_1_above(pages, name):
    page = pages[name]
    height, width = page.labels.shape
    if name in MADE:
        assert (height, width) == MADE[name][0] and page.reduction == MADE[name][3]
    else:
        assert page.reduction == 1
    panels = page.outlines["panels"]
    assert (panels["width"], panels["height"]) == (-(-width // page.reduction), -(-height // page.reduction))
    assert page.outlines["image"] == {"width": width, "height": height}
    for which in ("near", "gap"):
        assert page.panel(which).shape == (panels["height"], panels["width"], 3)


def test_picture_is_8_bits_indexed(page):
    assert page.mode == "P" and page.indices.dtype == numpy.uint8


# ---- outlines ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("which", ["near", "gap"])
def test_outlines_lie_on_the_boundaries_of_the_labels(page, which):
    drawn = is_outline(page.panel(which))
    hidden = page.numbers() | is_spot(page.panel(which))
    wanted = boundary(page.shown_labels())
    assert wanted.any()
    if page.reduction == 1:
        assert (drawn[~hidden] == wanted[~hidden]).all()
    # The boundary of the image itself, in panel pixels: no drawn pixel is more than one away from it, and at most
    # 2 % of it is without a drawn pixel beside it.
    full = numpy.argwhere(boundary(page.labels)) // page.reduction
    there = numpy.zeros(drawn.shape, bool)
    there[full[:, 0], full[:, 1]] = True
    assert not (drawn & ~scipy.ndimage.binary_dilation(there, BLOCK)).any()
    seen = there & ~hidden
    assert (seen & scipy.ndimage.binary_dilation(drawn, BLOCK)).sum() >= 0.98 * seen.sum()
    assert (drawn & wanted & ~hidden).sum() >= 0.98 * (wanted & ~hidden).sum()


def test_a_shifted_panel_would_be_seen(pages):
    # the check above fails when the panel is read one pixel off
    page = pages["a"]
    drawn, wanted = is_outline(page.panel("gap")), boundary(page.labels)
    hidden = page.numbers()
    for dy, dx in ((0, 1), (1, 0), (-1, 0), (0, -1)):
        moved = numpy.roll(wanted, (dy, dx), (0, 1))
        assert (drawn & moved & ~hidden).sum() < 0.9 * (moved & ~hidden).sum()


def fill(rings):
    """Even-odd: each upright edge turns everything to its right around. Rings are pixel corners at .5. The box that is
    filled, and which of its pixels are inside."""
    rings = [numpy.array(ring).reshape(-1, 2) + 0.5 for ring in rings]
    assert all((ring == numpy.rint(ring)).all() for ring in rings)
    (left, top), (right, bottom) = (f(numpy.vstack(rings), 0).astype(int) for f in (numpy.min, numpy.max))
    turned = numpy.zeros((bottom - top, right - left + 1), int)
    for ring in rings:
        corners = ring.astype(int) - (left, top)
        for (x0, y0), (x1, y1) in zip(corners, numpy.roll(corners, -1, 0)):
            assert (x0 == x1) != (y0 == y1)  # along one axis, and somewhere
            if x0 == x1:
                turned[min(y0, y1):max(y0, y1), x0] += 1
    return numpy.s_[top:bottom, left:right], (turned.cumsum(1) % 2 == 1)[:, :-1]


def shoelace(ring):
    x, y = numpy.array(ring).reshape(-1, 2).T
    return (x * numpy.roll(y, -1) - y * numpy.roll(x, -1)).sum() / 2


def test_polygons_give_the_labels_back(page):
    again = numpy.zeros_like(page.labels)
    for entry in page.outlines["cells"]:
        box, inside = fill(entry["rings"])
        assert not again[box][inside].any()
        again[box][inside] = entry["cell"]
        assert sum(map(shoelace, entry["rings"])) == inside.sum()
    assert (again == page.labels).all()
    assert [entry["cell"] for entry in page.outlines["cells"]] == [int(row["cell"]) for row in page.cells]


def test_polygons_have_corners_only(page):
    for entry in page.outlines["cells"]:
        for ring in entry["rings"]:
            sides = numpy.diff(numpy.array(ring + ring[:2]).reshape(-1, 2), axis=0)
            assert ((sides[:, 0] == 0) != numpy.roll(sides[:, 0] == 0, 1)).all()


def test_outlines_name_their_overlay_and_pixel_size(results):
    page = Page(results["a"], "day1_a_near")
    assert page.outlines["overlay"] == "overlay/day1_a_near.png"
    assert page.outlines["pixel_size_um"] == PIXEL_UM
    assert set(page.outlines) == {"image", "pixel_size_um", "overlay", "panels", "coordinates", "cells"}


def test_outlines_are_the_same_bytes_again(demo, results, tmp_path):
    run = Run([*measure_arguments(demo, tmp_path / "out", "c"), "--threads", "1"])
    assert run.status == 0, run.err
    assert tree(tmp_path / "out")["outlines/day1_c_near.json"] == tree(results["c"])["outlines/day1_c_near.json"]


@pytest.mark.parametrize("overlay,there", [("no", False), ("flagged", False), ("full", True)])
def test_outlines_come_and_go_with_the_overlay(demo, tmp_path, overlay, there):
    out = tmp_path / "out"
    assert Run(measure_arguments(demo, out)).status == 0
    assert os.path.exists(out / "outlines/day1_a_near.json")
    with open(f"{demo}/assay.ini") as file:
        (tmp_path / "assay.ini").write_text(file.read().replace("overlay = yes", f"overlay = {overlay}"))
    arguments = measure_arguments(demo, out)
    arguments[arguments.index("-a") + 1] = str(tmp_path / "assay.ini")
    assert Run(arguments).status == 0
    assert os.path.exists(out / "outlines/day1_a_near.json") == os.path.exists(out / "overlay/day1_a_near.png") == there


# ---- colour bar ----------------------------------------------------------------------------------------------


class Bar:
    """The colour bar as a reader sees it: columns and rows of the ramp, ticks with their numbers, colours."""

    def __init__(self, page):
        panels = page.outlines["panels"]
        left = panels["gap"]["x"] + panels["width"]
        strip = page.rgb[:, left:]
        coloured = ~is_grey(strip) & ~is_cutoff(strip)
        tall = numpy.flatnonzero(coloured.sum(0) >= 100)
        self.x0, self.x1 = left + tall[0], left + tall[-1] + 1
        rows = numpy.flatnonzero(coloured[:, tall[0]])
        self.top, self.bottom = rows[0], rows[-1]
        assert len(rows) == self.bottom - self.top + 1 and len(tall) == self.x1 - self.x0
        self.ramp = page.rgb[self.top:self.bottom + 1, self.x0]
        assert (page.rgb[self.top:self.bottom + 1, self.x0:self.x1] == self.ramp[:, None]).all()
        self.read_ticks(page)
        self.read_colours()

    def read_ticks(self, page):
        """Value at each row, from the ticks: those beside the bar that carry a number."""
        levels = ink_levels(page.rgb)
        beside = page.rgb[self.top:self.bottom + 1, self.x1 + 2]
        dark = self.top + numpy.flatnonzero(luminance(beside) < 0.05)
        red = self.top + numpy.flatnonzero(is_cutoff(beside))
        self.words = {}
        for row in [*dark, *red]:
            words = read_near(levels, range(self.x1 + 5, self.x1 + 13), range(row + 3, row + 9), "0123456789.≤≥ cutof")
            if words:
                self.words[int(row)] = words
        self.cutoff_rows = [int(row) for row in red]
        values = {row: float(words.split()[-1]) for row, words in self.words.items() if row not in self.cutoff_rows}
        assert len(values) >= 3
        rows = numpy.array(sorted(values))
        numbers = numpy.array([values[row] for row in rows])
        self.slope, self.zero = numpy.polyfit(rows, numbers, 1)
        assert abs(self.value(rows) - numbers).max() <= 0.75 * abs(self.slope)  # each tick is on the nearest row
        self.numbers = {values[row]: self.words[row] for row in values}

    def value(self, row):
        return self.slope * numpy.asarray(row) + self.zero

    def read_colours(self):
        """Colour -> the middle of the values it stands for; half a level."""
        rows = {}
        for row, colour in enumerate(map(tuple, self.ramp.tolist())):
            rows.setdefault(colour, []).append(self.top + row)
        self.middle = {colour: float(self.value(sum(at) / len(at))) for colour, at in rows.items()}
        self.end = float(self.value(self.top))
        self.half_level = self.end / (len(rows) - 1) / 2
        # The colours at both ends stand for half a level on the bar, and for all that lies beyond it.
        self.middle[tuple(self.ramp[-1].tolist())], self.middle[tuple(self.ramp[0].tolist())] = 0.0, self.end


@pytest.fixture
def bar(page):
    return Bar(page)


def test_bar_starts_at_0_and_ends_at_four_cutoffs_or_more(page, bar):
    ends = {1, 2, 3, 4, 5, 6, 8}
    assert float(bar.value(bar.bottom)) == pytest.approx(0, abs=abs(bar.slope))
    last = max(bar.numbers)
    assert float(bar.value(bar.top)) == pytest.approx(last, abs=abs(bar.slope))
    assert 4 * page.cutoff <= last < 8.1 * page.cutoff
    assert float(f"{last:.0e}".split("e")[0]) in ends
    assert bar.numbers[0].startswith("≤") and bar.numbers[last].startswith("≥")
    others = [words for value, words in bar.numbers.items() if value not in (0, last)]
    assert others and not any("≤" in words or "≥" in words for words in others)


def test_cutoff_mark_lies_at_the_cutoff(page, bar):
    assert len(bar.cutoff_rows) == 1
    row = bar.cutoff_rows[0]
    assert float(bar.value(row)) == pytest.approx(page.cutoff, abs=abs(bar.slope))
    assert bar.words[row] == f"{page.cutoff:g} cuto"  # the two f share a column of pixels, which ends the reading
    # the arrow on the other side points at the same row
    red = is_cutoff(page.rgb[bar.top:bar.bottom + 1, bar.x0 - 10:bar.x0])
    rows, columns = numpy.nonzero(red)
    assert {int(bar.top + y) for y in rows[columns == columns.max()]} == {row}
    assert bar.top + (rows.min() + rows.max()) / 2 == pytest.approx(row, abs=0.5)


def shown_gap(page):
    """Means over what a panel pixel shows, of the pixels that have a gap."""
    if page.reduction == 1:
        return page.gap.astype(float)
    height, width = page.gap.shape
    padded = numpy.full((height + height % 2, width + width % 2), numpy.nan)
    padded[:height, :width] = page.gap
    four = padded.reshape(padded.shape[0] // 2, 2, -1, 2)
    known = numpy.isfinite(four).sum((1, 3))
    return numpy.nansum(four, (1, 3)) / numpy.where(known, known, numpy.nan)


def test_gap_colours_are_those_of_the_bar(page, bar):
    panel = page.panel("gap")
    inside = (page.shown_labels() > 0) & ~page.numbers() & ~is_outline(panel)
    gap = numpy.clip(shown_gap(page)[inside], 0, bar.end)
    shown = numpy.array([bar.middle.get(tuple(colour), numpy.nan) for colour in panel[inside].tolist()])
    known = numpy.isfinite(gap)
    assert known.mean() > 0.99 and numpy.isfinite(shown[known]).all()
    # half a level, and half a row, to which a level's middle can be read off the bar
    off = abs(shown - gap)[known]
    assert (off <= bar.half_level + abs(bar.slope) / 2).mean() >= 0.99
    assert off.max() <= 2 * bar.half_level + abs(bar.slope)
    assert abs((shown - gap)[known].mean()) < 0.25 * bar.half_level  # no shift of the whole ramp


# ---- contact tint --------------------------------------------------------------------------------------------


def least_patch_um2():
    with open(os.path.join(ROOT, "docs/settings.md")) as file:
        return float(re.search(r"`min_patch_um2`.*default ([\d.]+)", file.read()).group(1))


def contact_of(page):
    """Gap at most the cutoff, cell by cell in 8-connected patches of at least the least area."""
    least_um2 = least_patch_um2()
    found = numpy.zeros(page.labels.shape, bool)
    for cell, box in enumerate(scipy.ndimage.find_objects(page.labels), 1):
        patches, count = scipy.ndimage.label((page.labels[box] == cell) & (page.gap[box] <= page.cutoff), BLOCK)
        areas = numpy.bincount(patches.ravel(), minlength=count + 1) * PIXEL_UM ** 2
        found[box] |= (areas >= least_um2)[patches] & (patches > 0)
    return found


def test_tint_is_where_the_contact_is(page):
    near = page.panel("near")
    contact = contact_of(page)
    r = page.reduction
    padded = numpy.pad(contact, [(0, -n % r) for n in contact.shape])
    share = padded.reshape(padded.shape[0] // r, r, -1, r).mean((1, 3))
    hidden = page.numbers() | is_spot(near) | is_outline(near)
    tinted = ~is_grey(near) & ~hidden
    assert tinted.any()
    wrong = (tinted & (share < 0.5)) | (~tinted & (share > 0.5))
    assert not (wrong & ~hidden).any()
    # as much tint as there is contact, at 2:1 too
    assert tinted.sum() == pytest.approx(share[~hidden].sum(), rel=0.01)
    # and the contact itself is that of the table
    wanted = sum(float(row["contact_area_um2"] or 0) for row in page.cells)
    assert contact.sum() * PIXEL_UM ** 2 == pytest.approx(wanted, rel=1e-4)
    chroma, hue = chroma_and_hue(near[tinted])
    assert abs(numpy.median(hue) - 240) < 8


def test_tinted_pixels_add_up_to_the_contact_areas(page):
    near, labels = page.panel("near"), page.shown_labels()
    lines = is_spot(near) | is_outline(near)
    hidden = page.numbers() | lines
    tinted = ~is_grey(near) & ~hidden
    # Below marks the tint is taken to go on as it is around them.
    around = scipy.ndimage.distance_transform_edt(hidden, return_indices=True, return_distances=False)
    whole = numpy.where(hidden, tinted[around[0], around[1]], tinted)
    pixel_um2 = (PIXEL_UM * page.reduction) ** 2
    total = wanted_total = 0.0
    for row in page.cells:
        if not row["contact_area_um2"]:
            continue
        found, wanted = (whole & (labels == int(row["cell"]))).sum() * pixel_um2, float(row["contact_area_um2"])
        total, wanted_total = total + found, wanted_total + wanted
        assert found == pytest.approx(wanted, rel=0.05, abs=0.05 * float(row["spread_area_um2"]))
    assert total == pytest.approx(wanted_total, rel=0.02)


# ---- cells without a gap -------------------------------------------------------------------------------------


@pytest.fixture(scope="module", params=["some", "most"])
def dim_page(demo, tmp_path_factory, request):
    """Field d with so little near light, and a reference to match, that many pixels have no measurable gap."""
    folder, share = tmp_path_factory.mktemp("dim"), {"some": 3e-4, "most": 1e-4}[request.param]
    random, gain = numpy.random.default_rng(5), 2.17
    counts = numpy.maximum(tifffile.imread(f"{demo}/day1_d_near.tif").astype(float) - 100, 0)
    counts = 100 + random.poisson(counts * share * gain) / gain + random.normal(0, 1.6 / gain, counts.shape)
    tifffile.imwrite(folder / "d_near.tif", numpy.rint(counts).astype("uint16"))
    with open(f"{demo}/day1.ini") as file:
        text = file.read().replace("ratio = 1.5", f"ratio = {1.5 * share}")
    (folder / "instrument.ini").write_text(text.replace("file = day1_flat", f"file = {demo}/day1_flat"))
    run = Run(measure_arguments(demo, folder / "out", near=folder / "d_near.tif", wide=f"{demo}/day1_d_wide.tif",
                                instrument=folder / "instrument.ini"))
    assert run.status == 0, run.err
    return Page(folder / "out", "d_near")


def test_pixels_without_a_gap_are_hatched(dim_page):
    panel, labels = dim_page.panel("gap"), dim_page.labels
    hidden = dim_page.numbers(hatched=True) | is_outline(panel)
    hatched = is_grey(panel)
    for row in dim_page.cells:
        inside = (labels == int(row["cell"])) & ~hidden
        share = float(row["unresolved_um2"]) / float(row["spread_area_um2"])
        assert hatched[inside].mean() == pytest.approx(share, abs=0.04)  # what marks hide is a twentieth


def test_cells_that_report_no_contact_have_no_tint(dim_page):
    near = dim_page.panel("near")
    tinted = ~is_grey(near) & ~is_spot(near) & ~is_outline(near)
    for row in dim_page.cells:
        found = (tinted & (dim_page.labels == int(row["cell"]))).any()
        assert found == bool(row["contact_area_um2"] and float(row["contact_area_um2"]) > 0)


# ---- scale bar -----------------------------------------------------------------------------------------------


def test_scale_bar_is_as_long_as_it_says(page):
    panels = page.outlines["panels"]
    levels = ink_levels(page.rgb)
    left = panels["near"]["x"]
    below = panels["near"]["y"] + max(panels["height"], 120)
    column = luminance(page.rgb[below:below + 60, left]) < 0.05
    row = below + numpy.flatnonzero(column)[0]
    assert column[:60].sum() >= 3
    dark = luminance(page.rgb[row, left:]) < 0.05
    length = int(numpy.argmin(dark))
    words = read_near(levels, range(left + length, left + length + 10), range(row + 2, row + 10), "0123456789. µm")
    match = re.fullmatch(r"([\d.]+) µm", words)
    assert match, words
    number = float(match.group(1))
    assert float(f"{number:.0e}".split("e")[0]) in (1, 2, 5)
    assert length == pytest.approx(number / (PIXEL_UM * page.reduction), abs=0.5)
    assert 0.1 < length / panels["width"] < 0.4


# ---- palette -------------------------------------------------------------------------------------------------


def test_gap_ramp_keeps_its_order_in_grey_print(page, bar):
    ramp = bar.ramp[::-1][numpy.r_[True, (numpy.diff(bar.ramp[::-1].astype(int), axis=0) != 0).any(1)]]
    assert len(ramp) >= 64
    assert (numpy.diff(luminance(ramp)) < 0).all()
    # even steps of lightness: no step is more than twice the mean
    steps = -numpy.diff(oklab(ramp)[:, 0])
    assert steps.max() < 2 * steps.mean()
    assert oklab(ramp[0])[0] - oklab(ramp[-1])[0] > 0.6


def seen_by(rgb, who):
    return oklab(rgb) if who == "all" else oklab_of_linear(dichromat(rgb, who))


@pytest.mark.parametrize("who", ["all", "protan", "deutan"])
def test_colours_differ_for_every_eye(pages, who):
    page = pages["a"]
    ramp = Bar(page).ramp
    colours = numpy.array(sorted({tuple(c) for c in page.panel("near").reshape(-1, 3).tolist()}))
    outline = colours[is_outline(colours)]
    tint = colours[~is_grey(colours) & ~is_outline(colours) & ~is_spot(colours)]
    grey = colours[is_grey(colours)]
    assert len(outline) == 1 and len(tint) > 20
    line = seen_by(outline, who)[0]

    def distance(others):
        return numpy.linalg.norm(seen_by(others, who) - line, axis=1).min()

    # A just noticeable difference is about 0.02; thin lines need some times that.
    assert distance(ramp) > 0.08
    assert distance(grey) > 0.08
    assert distance(tint) > 0.08
    spot = seen_by(colours[is_spot(colours)], who)
    assert len(spot) == 1
    for others in (grey, tint, outline):
        assert numpy.linalg.norm(seen_by(others, who) - spot[0], axis=1).min() > 0.08
    # The tint beside the grey of the same lightness, in most of the range.
    nearest = [numpy.linalg.norm(seen_by(grey, who) - colour, axis=1).min() for colour in seen_by(tint, who)]
    assert numpy.median(nearest) > 0.03
    ends = seen_by(ramp[[0, -1]], who)
    assert numpy.linalg.norm(ends[0] - ends[1]) > 0.5
