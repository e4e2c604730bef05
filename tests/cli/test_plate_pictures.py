"""Pictures of a plate run against its tables. Places are worked out here from the geometry of microplates (rows A.. from the top,
columns 1.. from the left) and the page's margins; colours are read from the map's own scale."""
import csv
import math
import os
import shutil

import numpy as np
import pytest
import tifffile
from PIL import Image

from conftest import Run, tree

LEFT, MARGIN, STEPS = 54, 24, 25
METRICS = {"spread_area_um2": "spread_area_um2_mean", "contact_area_um2": "contact_area_um2_mean",
           "attachment_fraction": "attachment_fraction_mean", "gap_median_nm": "gap_median_nm_mean",
           "spot_count": "spot_count_mean", "cells_per_mm2": "cells_per_mm2"}
ORANGE = np.array([236, 141, 54])  # about: the outlines' hue is 55 degrees at lightness 0.74


def write_sheet(folder, demo):
    """Six wells of a 96-well plate: two fields, one, a control, no cells, a damaged file, no file."""
    for name in ("day1.ini", "assay.ini", *(n for n in os.listdir(demo) if "flat" in n or n.startswith("day1_"))):
        shutil.copy(f"{demo}/{name}", folder)
    random = np.random.default_rng(11)
    for name in ("near", "wide"):
        flat = tifffile.imread(f"{demo}/day1_flat_{name}.tif")  # background of the bench's camera and nothing else
        signal = 250 * flat / flat.mean()
        tifffile.imwrite(f"{folder}/empty_{name}.tif", np.rint(
            100 + random.normal(signal, np.sqrt(signal / 2.17 + (1.6 / 2.17) ** 2))).astype("uint16"))
        with open(f"{demo}/day1_a_{name}.tif", "rb") as whole, open(f"{folder}/cut_{name}.tif", "wb") as cut:
            cut.write(whole.read(4000))
    rows = [("day1_a", "A1", 1, "thrift", "sample"), ("day1_b", "A1", 2, "thrift", "sample"),
            ("day1_c", "H12", 1, "sedge", "sample"), ("day1_d", "E5", 1, "vehicle", "control"),
            ("empty", "B2", 1, "thrift", "sample"), ("cut", "C3", 1, "thrift", "sample"),
            ("gone", "D4", 1, "thrift", "sample")]
    with open(f"{folder}/sheet.csv", "w") as file:
        file.write("near,wide,plate,well,field,vessel,treatment,role,acquired\n")
        for k, (name, well, field, treatment, role) in enumerate(rows):
            file.write(f"{name}_near.tif,{name}_wide.tif,P_1,{well},{field},96,{treatment},{role},2030-05-06T09:{k:02}:00\n")


def plate(folder, out, threads=2, extra=()):
    return Run(["plate", f"{folder}/sheet.csv", "-i", f"{folder}/day1.ini", "-a", f"{folder}/assay.ini", *extra,
                "-o", out, "--threads", threads])


@pytest.fixture(scope="module")
def inputs(demo, tmp_path_factory):
    folder = str(tmp_path_factory.mktemp("plate"))
    write_sheet(folder, demo)
    return folder


@pytest.fixture(scope="module")
def out(inputs, tmp_path_factory):
    folder = str(tmp_path_factory.mktemp("out") / "out")
    run = plate(inputs, folder)
    assert run.status == 1, run.err  # two fields failed
    return folder


def table(out, name):
    with open(f"{out}/{name}", newline="") as file:
        return list(csv.DictReader(file))


def picture(path):
    return np.asarray(Image.open(path).convert("RGB")).astype(int)


def round_range(least, most):
    """Whole steps of 1, 2 or 5 times a power of ten, at most eight of them over what is to be held."""
    middle = (least + most) / 2
    least, most = min(least, 0.75 * middle), max(most, 1.25 * middle)
    rough = (most - least) / 8
    power = 10 ** math.floor(math.log10(rough))
    step = next(s * power for s in (1, 2, 5, 10) if s * power >= rough * (1 - 1e-9))
    return step * math.floor(least / step + 1e-9), step * math.ceil(most / step - 1e-9)


class Map:
    def __init__(self, path):
        self.pixels = picture(path)
        self.side = (1180 - 2 * MARGIN - 30) // 12
        grid = (158, 158, 158)
        long_rows = [y for y in range(self.pixels.shape[0])
                     if (self.pixels[y, LEFT:LEFT + 12 * self.side] == grid).all(axis=1).mean() > 0.99]
        assert len(long_rows) == 9 and np.all(np.diff(long_rows) == self.side)  # eight rows of square wells
        self.top = long_rows[0]
        bar_y = long_rows[-1] + 5 * 4 + 8
        ends = [MARGIN + math.ceil(420 * (k + 0.5) / STEPS) for k in range(STEPS)]
        self.scale = [tuple(self.pixels[bar_y, x]) for x in ends]

    def well(self, row, column):
        """The lower half of a well, where no words are, without its frame."""
        x, y = LEFT + column * self.side, self.top + row * self.side
        return self.pixels[y + 3 * self.side // 4:y + self.side - 6, x + 6:x + self.side - 6].reshape(-1, 3)


def luminance(colour):
    """Relative luminance, WCAG 2.1."""
    linear = [c / 255 / 12.92 if c / 255 <= 0.04045 else ((c / 255 + 0.055) / 1.055) ** 2.4 for c in colour]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("metric", METRICS)
def test_colours_of_a_map_say_what_the_table_says(out, metric):
    values = {w["well"]: float(w[METRICS[metric]]) for w in table(out, "wells.csv") if w[METRICS[metric]]}
    assert {"A01", "E05", "H12"} <= set(values)
    from_, to = round_range(min(values.values()), max(values.values()))
    drawn = Map(f"{out}/maps/P_1_{metric}.png")
    for well, value in values.items():
        if well == "B02":  # hatched over its colour
            continue
        step = min(STEPS - 1, int((value - from_) / (to - from_) * STEPS))
        colours = {tuple(c) for c in drawn.well("ABCDEFGH".index(well[0]), int(well[1:]) - 1)}
        assert colours == {drawn.scale[step]}, well


def test_the_scale_keeps_its_order_in_grey(out):
    light = [luminance(c) for c in Map(f"{out}/maps/P_1_gap_median_nm.png").scale]
    assert len(set(light)) == STEPS and light == sorted(light, reverse=True)


def test_wells_without_a_value_are_told_apart(out):
    states = {w["well"]: w["state"] for w in table(out, "wells.csv")}
    assert (states["B02"], states["C03"], states["D04"]) == ("empty", "failed", "not_imaged")
    drawn = Map(f"{out}/maps/P_1_spread_area_um2.png")
    wells = {name: drawn.well(row, column) for name, row, column in
             (("empty", 1, 1), ("failed", 2, 2), ("not_imaged", 3, 3), ("absent", 5, 5))}
    white = {name: (w == 255).all(axis=1) for name, w in wells.items()}
    assert white["absent"].all()
    shares = [1 - white[name].mean() for name in ("empty", "failed", "not_imaged")]
    assert all(0.05 < s < 0.5 for s in shares)
    assert not np.array_equal(white["empty"], white["failed"])
    assert not np.array_equal(white["empty"], white["not_imaged"])
    assert not np.array_equal(white["failed"], white["not_imaged"])


# ---- thumbnails and contact sheets ---------------------------------------------------------------

def key(field_id):
    return field_id.replace("/", "=2F")


def is_orange(pixels):
    return (np.abs(pixels - ORANGE).max(axis=-1) < 40) & (pixels[..., 0] - pixels[..., 2] > 100)


def measured(out):
    return [f["field_id"] for f in table(out, "fields.csv") if f["status"] != "failed"]


def test_every_measured_field_has_a_thumbnail(out):
    assert sorted(os.listdir(f"{out}/thumb")) == sorted(f"{key(f)}.png" for f in measured(out))
    for field in measured(out):
        assert Image.open(f"{out}/thumb/{key(field)}.png").size == (256, 256)


def test_a_thumbnail_is_the_near_image_with_outlines(out, inputs):
    pixels = picture(f"{out}/thumb/{key('P_1/A01/1')}.png")
    labels = tifffile.imread(f"{out}/labels/{key('P_1/A01/1')}.tif").astype(int)
    near = tifffile.imread(f"{inputs}/day1_a_near.tif").astype(float)
    factor = -(-near.shape[0] // 256)
    middle = labels[factor // 2::factor, factor // 2::factor][:256, :256]
    padded = np.pad(middle, 1, constant_values=-1)
    outline = np.zeros_like(middle, bool)
    for other in (padded[:-2, 1:-1], padded[2:, 1:-1], padded[1:-1, :-2], padded[1:-1, 2:]):
        outline |= (middle > 0) & (other >= 0) & (other != middle)
    assert np.array_equal(is_orange(pixels), outline)
    mean = near.reshape(256, factor, 256, factor).mean(axis=(1, 3))
    inside = (middle > 0) & ~outline
    grey = pixels[..., 0] / 255
    assert np.corrcoef(grey[inside] ** 2, np.minimum(mean, np.quantile(mean, 0.997))[inside])[0, 1] > 0.98
    assert grey[middle == 0].mean() < 0.2 < grey[inside].mean()


def test_a_contact_sheet_shows_all_fields_of_its_well(out):
    assert sorted(os.listdir(f"{out}/wells")) == sorted(
        f"P_1_{w}.png" for w in ("A01", "B02", "C03", "D04", "E05", "H12"))
    sheet = is_orange(picture(f"{out}/wells/P_1_A01.png"))
    for place, field in enumerate(("P_1/A01/1", "P_1/A01/2")):
        stamp = is_orange(picture(f"{out}/thumb/{key(field)}.png"))
        x = 14 + place * (256 + 10)
        tops = [y for y in range(sheet.shape[0] - 255) if np.array_equal(sheet[y:y + 256, x:x + 256], stamp)]
        assert len(tops) == 1, field


def grey_a_count(shown, near, background, use):
    """Greys are square roots of the signal (report/overlay.h): their squares over the signal are one number, 1 / white."""
    factor = near.shape[0] // 256
    signal = near.reshape(256, factor, 256, factor).mean(axis=(1, 3)) - 100 - background
    return np.median((shown[use] / 255) ** 2 / signal[use])


def test_fields_of_a_plate_share_one_white(out, inputs):
    own, common = [], []
    for field, file in (("P_1/A01/1", "a"), ("P_1/H12/1", "c"), ("P_1/E05/1", "d")):
        stamp = picture(f"{out}/thumb/{key(field)}.png")
        sheet = picture(f"{out}/wells/P_1_{field.split('/')[1]}.png")
        top = next(y for y in range(sheet.shape[0] - 255)
                   if np.array_equal(is_orange(sheet[y:y + 256, 14:270]), is_orange(stamp)))
        shown = sheet[top:top + 256, 14:270]
        near = tifffile.imread(f"{inputs}/day1_{file}_near.tif").astype(float)
        background = next(float(f["near_background_adu"]) for f in table(out, "fields.csv") if f["field_id"] == field)
        use = ~is_orange(stamp) & (stamp[..., 0] > 100) & (np.maximum(shown, stamp)[..., 0] < 240)
        own.append(grey_a_count(stamp[..., 0], near, background, use))
        common.append(grey_a_count(shown[..., 0], near, background, use))
    assert np.ptp(common) / np.mean(common) < 0.05
    assert np.ptp(own) / np.mean(own) > 0.1  # else this would show nothing


def test_flagged_fields_have_a_heavy_frame(out):
    states = {f["well"]: f["status"] for f in table(out, "fields.csv")}
    assert states["B02"] == "flagged" and states["H12"] == "ok"
    red = {}
    for well in ("B02", "H12"):
        pixels = picture(f"{out}/wells/P_1_{well}.png")
        red[well] = int(((pixels[..., 0] - pixels[..., 1] > 100) & ~is_orange(pixels)).sum())
    assert red == {"B02": 4 * 3 * (256 + 3), "H12": 0}  # three pixels wide around 256 x 256


# ---- drift ---------------------------------------------------------------------------------------

def test_drift_marks_flagged_fields(out):
    pixels = picture(f"{out}/drift.png")
    assert pixels.shape == (720, 1280, 3)
    amber = (pixels[..., 0] - pixels[..., 2] > 100).sum(axis=0)
    # One ring in the legend, below the first panel; the empty field adds one in each panel where it has a value.
    assert amber[:430].sum() > 0 and amber[860:].sum() > 0


# ---- same bytes ----------------------------------------------------------------------------------

def pictures(out):
    return {p: b for p, b in tree(out).items() if p.split(os.sep)[0] in ("maps", "wells", "thumb", "drift.png")}


def test_same_bytes_whatever_the_threads(out, inputs, tmp_path):
    run = plate(inputs, str(tmp_path / "one"), threads=1)
    assert run.status == 1, run.err
    assert len(pictures(out)) == 6 + 6 + 5 + 1
    assert pictures(out) == pictures(str(tmp_path / "one"))


def test_pictures_need_no_images(inputs, tmp_path):
    """Merge makes the same pictures from plan and records when the images are gone."""
    folder = str(tmp_path / "in")
    shutil.copytree(inputs, folder)
    assert plate(folder, str(tmp_path / "out")).status == 1
    before = pictures(str(tmp_path / "out"))
    for name in os.listdir(folder):
        if name.endswith(("_near.tif", "_wide.tif")) and "flat" not in name:
            os.remove(f"{folder}/{name}")
    for name in ("maps", "wells"):
        shutil.rmtree(tmp_path / "out" / name)
    run = Run(["merge", str(tmp_path / "out"), "--sheet", f"{folder}/sheet.csv", "-i", f"{folder}/day1.ini", "-a",
               f"{folder}/assay.ini"])
    assert run.status == 1, run.err
    assert pictures(str(tmp_path / "out")) == before


def test_no_thumbnails_without_overlays(inputs, tmp_path):
    (tmp_path / "no.ini").write_text("[output]\noverlay = no\nmaps = no\n")
    run = plate(inputs, str(tmp_path / "out"), extra=["-a", str(tmp_path / "no.ini")])
    assert run.status == 1, run.err
    names = os.listdir(tmp_path / "out")
    assert "thumb" not in names and "wells" not in names and "maps" in names and "drift.png" in names


def test_coverslips_have_sheets_of_their_own_and_no_maps(inputs, tmp_path):
    (tmp_path / "sheet.csv").write_text(
        "near,wide,plate,well,vessel\n"
        f"{inputs}/day1_a_near.tif,{inputs}/day1_a_wide.tif,a,b_c,coverslip\n"
        f"{inputs}/day1_b_near.tif,{inputs}/day1_b_wide.tif,a_b,c,coverslip\n"
        f"{inputs}/day1_c_near.tif,{inputs}/day1_c_wide.tif,,,\n")
    run = Run(["plate", str(tmp_path / "sheet.csv"), "-i", f"{inputs}/day1.ini", "-a", f"{inputs}/assay.ini", "-o",
               str(tmp_path / "out")])
    assert run.status == 0, run.err
    # Both would be a_b_c; the field without a well is on no sheet.
    assert sorted(os.listdir(tmp_path / "out" / "wells")) == ["a_b_c.png", "a_b_c=2.png"]
    assert not os.path.exists(tmp_path / "out" / "maps")
    assert len(os.listdir(tmp_path / "out" / "thumb")) == 3
