# SPDX-License-Identifier: GPL-3.0-or-later
"""sheet build: rows from names, pages, OME-XML and layouts. What the sheet must hold is written out in the tests; OME-TIFFs
are made by tifffile, whose OME-XML is its own."""
import csv
import json
import os

import numpy
import pytest
import tifffile

from conftest import Run

CHANNELS = ["--near-channel", "near", "--wide-channel", "wide"]


def table(path):
    with open(path, newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def touch(folder, *names):
    for name in names:
        path = os.path.join(str(folder), name)
        os.makedirs(os.path.dirname(path), exist_ok=True)
        open(path, "wb").close()


def pairs(folder, stems, near="near", wide="wide", ending=".tif"):
    touch(folder, *[f"{stem}_{channel}{ending}" for stem in stems for channel in (near, wide)])


def build(folder, name, *more, channels=CHANNELS, out="sheet.csv"):
    run = Run(["sheet", "build", str(folder), "-o", str(folder / out), "--name", name, *channels, *map(str, more)])
    return run, table(folder / out) if run.status == 0 else None


def built(*arguments, **named):
    run, rows = build(*arguments, **named)
    assert run.status == 0, run.err
    return rows


# ---- names ---------------------------------------------------------------------------------------


def test_plate_well_field_channel(tmp_path):
    pairs(tmp_path, [f"p1_{well}_{field}" for well in ("A1", "B10", "B2") for field in (1, 2, 10)])
    rows = built(tmp_path, "{plate}_{well}_{field}_{channel}.tif")
    assert list(rows[0]) == ["near", "wide", "plate", "well", "field"]
    assert [(row["well"], row["field"]) for row in rows] == [(w, f) for w in ("A01", "B02", "B10") for f in ("1", "2", "10")]
    assert rows[0]["near"] == "p1_A1_1_near.tif" and rows[0]["wide"] == "p1_A1_1_wide.tif"


def test_a_field_may_hold_the_separator_where_wells_tell(tmp_path):
    pairs(tmp_path, ["my_plate_1_A01_3"])
    row, = built(tmp_path, "{plate}_{well}_{field}_{channel}.tif")
    assert (row["plate"], row["well"], row["field"]) == ("my_plate_1", "A01", "3")


def test_names_that_can_be_read_in_two_ways_are_refused(tmp_path):
    pairs(tmp_path, ["no_drug_glass"])
    run, _ = build(tmp_path, "{treatment}_{coating}_{channel}.tif")
    assert run.status == 2 and "two ways" in run.err and "'no'" in run.err and "'no_drug'" in run.err
    assert not os.path.exists(tmp_path / "sheet.csv")


def test_anything_and_extensions_in_either_case(tmp_path):
    pairs(tmp_path, ["scan 07 A01"], ending=".TIF")
    row, = built(tmp_path, "{*} {well}_{channel}.tif")
    assert row["near"] == "scan 07 A01_near.TIF"


def test_folders_are_part_of_the_name(tmp_path):
    pairs(tmp_path, ["day1/A01", "day2/A01"])
    assert [row["session"] for row in built(tmp_path, "{session}/{well}_{channel}.tif")] == ["day1", "day2"]
    run, _ = build(tmp_path, "{well}_{channel}.tif")
    assert run.status == 2 and "in the folders below" in run.err


def test_dot_files_and_thumbnails_are_left_out_and_said(tmp_path):
    pairs(tmp_path, ["A01"])
    touch(tmp_path, "._A01_near.tif", "._A01_wide.tif", "A01_thumb_near.tif", "Thumbs.db", ".DS_Store")
    run, rows = build(tmp_path, "{well}_{channel}.tif")
    assert len(rows) == 1 and "3 names that begin with a dot, 2 thumbnails" in run.err


def test_two_files_of_one_field_are_both_named(tmp_path):
    pairs(tmp_path, ["A1", "A01"])
    run, _ = build(tmp_path, "{well}_{channel}.tif")
    assert run.status == 2 and "'A01_near.tif' and 'A1_near.tif'" in run.err and "'A01_wide.tif' and 'A1_wide.tif'" in run.err


def test_the_same_field_in_two_folders(tmp_path):
    pairs(tmp_path, ["mon/A01", "wed/A01"])
    run = Run(["sheet", "build", "mon", "wed", "-o", "s.csv", "--name", "{well}_{channel}.tif", *CHANNELS], cwd=str(tmp_path))
    assert run.status == 2 and "in mon" in run.err and "{session}/" in run.err
    pairs(tmp_path, ["wed/A02"])
    os.remove(tmp_path / "wed/A01_near.tif")
    os.remove(tmp_path / "wed/A01_wide.tif")
    run = Run(["sheet", "build", "mon", "wed", "-o", "s.csv", "--name", "{well}_{channel}.tif", *CHANNELS], cwd=str(tmp_path))
    assert run.status == 0 and [row["near"] for row in table(tmp_path / "s.csv")] == ["mon/A01_near.tif", "wed/A02_near.tif"]


def test_a_missing_partner_is_named(tmp_path):
    pairs(tmp_path, ["p1_A01", "p1_A02"])
    os.remove(tmp_path / "p1_A02_wide.tif")
    run, _ = build(tmp_path, "{plate}_{well}_{channel}.tif")
    assert run.status == 2 and "'p1_A02_near.tif' has no wide image: expected p1_A02_wide.tif" in run.err
    run, rows = build(tmp_path, "{plate}_{well}_{channel}.tif", "--skip-incomplete")
    assert run.status == 0 and [row["well"] for row in rows] == ["A01"] and "p1_A02_wide.tif" in run.err


def test_other_channels_are_said(tmp_path):
    pairs(tmp_path, ["A01"])
    touch(tmp_path, "A01_dapi.tif")
    assert "dapi (1)" in build(tmp_path, "{well}_{channel}.tif")[0].err
    run, _ = build(tmp_path, "{well}_{channel}.tif", channels=["--near-channel", "tirf", "--wide-channel", "epi"])
    assert run.status == 2 and "no file is of channel 'tirf'" in run.err and "near (1)" in run.err


def test_nuclei_and_masks(tmp_path):
    pairs(tmp_path, ["A01"])
    touch(tmp_path, "A01_dapi.tif", "A01_mask.tif")
    row, = built(tmp_path, "{well}_{channel}.tif", "--nuclei-channel", "dapi", "--mask-channel", "mask")
    assert (row["nuclei"], row["mask"]) == ("A01_dapi.tif", "A01_mask.tif")


def test_unknown_fields_name_the_nearest(tmp_path):
    pairs(tmp_path, ["A01"])
    run, _ = build(tmp_path, "{wel}_{channel}.tif")
    assert run.status == 2 and "'well'" in run.err
    run, _ = build(tmp_path, "{spread_area_um2}_{channel}.tif")
    assert run.status == 2 and "results" in run.err


@pytest.mark.parametrize("template", ["", "{well", "well}", "{}", "{well}{field}.tif", "{well}{*}.tif"])
def test_broken_templates(tmp_path, template):
    pairs(tmp_path, ["A01"])
    assert build(tmp_path, template)[0].status == 2


def test_nothing_fits_says_what_is_there(tmp_path):
    touch(tmp_path, "image_A01.img")
    run, _ = build(tmp_path, "{well}_{channel}.tif")
    assert run.status == 2 and "image_A01.img" in run.err
    run = Run(["sheet", "build", str(tmp_path / "none"), "-o", str(tmp_path / "s.csv"), "--name", "{well}.tif", *CHANNELS])
    assert run.status == 2 and "none" in run.err


def test_a_pathological_template_ends(tmp_path):
    touch(tmp_path, "a" * 200 + ".tif")
    run, _ = build(tmp_path, "{*}a{*}a{*}a{*}a{*}a{*}a{*}b_{channel}.tif")
    assert run.status == 2


def test_a_link_keeps_its_name(tmp_path):
    touch(tmp_path, "store/9f3a", "store/77bc")
    os.makedirs(tmp_path / "images")
    os.symlink("../store/9f3a", tmp_path / "images/A01_near.tif")
    os.symlink("../store/77bc", tmp_path / "images/A01_wide.tif")
    run = Run(["sheet", "build", str(tmp_path / "images"), "-o", str(tmp_path / "s.csv"), "--name", "{well}_{channel}.tif", *CHANNELS])
    assert run.status == 0 and table(tmp_path / "s.csv")[0]["near"] == "images/A01_near.tif"


# ---- paths -----------------------------------------------------------------------------------------


def test_paths_are_relative_to_the_sheet_or_the_root(tmp_path):
    pairs(tmp_path, ["images/A01"])
    os.makedirs(tmp_path / "sheets")
    base = ["sheet", "build", str(tmp_path / "images"), "--name", "{well}_{channel}.tif", *CHANNELS]
    for out, more, near in (("s.csv", [], "images/A01_near.tif"), ("sheets/s.csv", [], "../images/A01_near.tif"),
                            ("sheets/s.csv", ["--root", str(tmp_path / "images")], "A01_near.tif")):
        assert Run([*base, "-o", str(tmp_path / out), *more]).status == 0
        assert table(tmp_path / out)[0]["near"] == near
    # a folder that is yet to be made
    assert Run([*base, "-o", str(tmp_path / "new/s.csv")]).status == 0
    assert table(tmp_path / "new/s.csv")[0]["near"] == "../images/A01_near.tif"
    run = Run([*base, "-o", "s.csv"], cwd=str(tmp_path / "images"))
    assert run.status == 0 and table(tmp_path / "images/s.csv")[0]["near"] == "A01_near.tif"


# ---- options ---------------------------------------------------------------------------------------


def test_set(tmp_path):
    pairs(tmp_path, ["p1_A01"])
    row, = built(tmp_path, "{plate}_{well}_{channel}.tif", "--set", "replicate=day1", "--set", "passage=12")
    assert (row["replicate"], row["passage"]) == ("day1", "12")
    for bad in ("plate=p2", "replicate", "=3", "replicat=3", "cells=3"):
        assert build(tmp_path, "{plate}_{well}_{channel}.tif", "--set", bad)[0].status == 2, bad


@pytest.mark.parametrize("order, expected", [
    ("row", ["B02", "B03", "C02", "C03"]),
    ("serpentine", ["B02", "B03", "C03", "C02"]),
])
def test_order(tmp_path, order, expected):
    pairs(tmp_path, [f"s{k}" for k in range(1, 9)])
    rows = built(tmp_path, "s{position}_{channel}.tif", "--order", order, "--fields-per-well", 2, "--vessel", 96, "--wells", "B02-C03")
    place = {row["position"]: (row["well"], row["field"]) for row in rows}
    assert [place[str(k)] for k in range(1, 9)] == [(well, str(f)) for well in expected for f in (1, 2)]


def test_order_counts_positions(tmp_path):
    pairs(tmp_path, [f"s{k}" for k in range(1, 8)])
    run, _ = build(tmp_path, "s{position}_{channel}.tif", "--order", "row", "--fields-per-well", 2, "--vessel", 96, "--wells", "B02-C03")
    assert run.status == 2 and "7 positions" in run.err and "4 wells of 2 fields make 8" in run.err


def test_positions(tmp_path):
    pairs(tmp_path, ["s001", "s002", "s003"])
    (tmp_path / "stage.csv").write_text("position,well,field,x_um\n1,B02,1,10.5\n2,B02,2,20.5\n3,C07,1,30\n")
    rows = built(tmp_path, "s{position}_{channel}.tif", "--positions", tmp_path / "stage.csv")
    assert [(row["well"], row["field"]) for row in rows] == [("B02", "1"), ("B02", "2"), ("C07", "1")]
    assert "x_um" not in rows[0]  # a name of the results; the stage's coordinates are not carried through
    (tmp_path / "stage.csv").write_text("position,well,field\n1,B02,1\n2,B02,2\n")
    run, _ = build(tmp_path, "s{position}_{channel}.tif", "--positions", tmp_path / "stage.csv")
    assert run.status == 2 and "position 003" in run.err


@pytest.mark.parametrize("sign_x, sign_y", [(1, 1), (-1, 1), (1, -1), (-1, -1)])
def test_positions_by_coordinates(tmp_path, sign_x, sign_y):
    # ANSI SLAS 4-2004: wells of a 96-well plate are 9 mm apart
    wells = {"A01": (0, 0), "A12": (11, 0), "H01": (0, 7), "C05": (4, 2)}
    lines, expected, k = ["position,x_um,y_um"], {}, 0
    for well, (column, row) in wells.items():
        for field, (dx, dy) in enumerate(((-300, 250), (310, -120)), 1):
            k += 1
            lines.append(f"{k},{50000 + sign_x * (9000 * column + dx)},{-20000 + sign_y * (9000 * row + dy)}")
            expected[str(k)] = (well, str(field))
    pairs(tmp_path, [f"s{n}" for n in expected])
    (tmp_path / "stage.csv").write_text("\n".join(lines) + "\n")
    base = [tmp_path, "s{position}_{channel}.tif", "--positions", tmp_path / "stage.csv"]
    rows = built(*base, "--a1", "50000,-20000", "--vessel", 96)
    assert {row["position"]: (row["well"], row["field"]) for row in rows} == expected
    for more, word in ((["--vessel", 96], "--a1"), (["--a1", "50000,-20000"], "--vessel"), (["--a1", "5", "--vessel", 96], "two numbers"),
                       (["--a1", "54500,-20000", "--vessel", 96], "no well"), (["--a1", "50000,-20000", "--vessel", 24], "standard")):
        run, _ = build(*base, *more)
        assert run.status == 2 and word in run.err, run.err


def test_coordinates_that_fit_in_several_ways(tmp_path):
    pairs(tmp_path, ["s1"])
    (tmp_path / "stage.csv").write_text("position,x_um,y_um\n1,0,0\n")
    run, _ = build(tmp_path, "s{position}_{channel}.tif", "--positions", tmp_path / "stage.csv", "--a1", "0,0", "--vessel", 96)
    assert run.status == 2 and "whichever way" in run.err


# ---- pages and OME-TIFF ------------------------------------------------------------------------------


def test_pages(tmp_path):
    touch(tmp_path, "A01.tif")
    row, = built(tmp_path, "{well}.tif", channels=["--near-page", "1", "--wide-page", "2"])
    assert row["near"] == row["wide"] == "A01.tif" and (row["near_page"], row["wide_page"]) == ("1", "2")


def ome(path, shape, axes, names, **metadata):
    tifffile.imwrite(path, numpy.zeros(shape, numpy.uint16), ome=True, photometric="minisblack",
                     metadata={"axes": axes, "Channel": {"Name": names}, "PhysicalSizeX": 0.16, "PhysicalSizeY": 0.16, **metadata})


OME_CHANNELS = ["--near-channel", "near488", "--wide-channel", "Wide488"]


def test_ome_channels(tmp_path):
    ome(tmp_path / "A01.ome.tif", (3, 16, 20), "CYX", ["brightfield", "wide488", "near488"])
    row, = built(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    assert (row["near_page"], row["wide_page"]) == ("3", "2")
    status = Run(["sheet", "check", str(tmp_path / "sheet.csv")])
    assert status.status == 0, status.out
    run, _ = build(tmp_path, "{well}.ome.tif", channels=["--near-channel", "tirf", "--wide-channel", "wide488"])
    assert run.status == 2 and "'brightfield', 'wide488', 'near488'" in run.err


@pytest.mark.parametrize("axes", ["TCYX", "CTYX"])
def test_ome_times_in_either_order(tmp_path, axes):
    shape = (4, 2, 16, 20) if axes == "TCYX" else (2, 4, 16, 20)
    ome(tmp_path / "A01.ome.tif", shape, axes, ["near488", "wide488"], TimeIncrement=90, TimeIncrementUnit="s")
    rows = built(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    near = [int(row["near_page"]) for row in rows]
    # closed form: with T outermost the planes of time t are 2 t + 1 and 2 t + 2, with C outermost t + 1 and 4 + t + 1
    assert near == ([1, 3, 5, 7] if axes == "TCYX" else [1, 2, 3, 4])
    assert [int(row["wide_page"]) for row in rows] == ([2, 4, 6, 8] if axes == "TCYX" else [5, 6, 7, 8])
    assert [row["time_min"] for row in rows] == ["0", "1.5", "3", "4.5"]


def test_ome_layers_need_a_choice(tmp_path):
    ome(tmp_path / "A01.ome.tif", (3, 2, 16, 20), "ZCYX", ["near488", "wide488"])
    run, _ = build(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    assert run.status == 2 and "3 layers" in run.err
    row, = built(tmp_path, "{well}.ome.tif", "--layer", 2, channels=OME_CHANNELS)
    assert (row["near_page"], row["wide_page"]) == ("3", "4")


def test_ome_that_disagrees_with_the_pages(tmp_path):
    ome(tmp_path / "A01.ome.tif", (3, 16, 20), "CYX", ["near488", "wide488", "x"])
    with tifffile.TiffFile(tmp_path / "A01.ome.tif") as file:
        xml = file.ome_metadata
    tifffile.imwrite(tmp_path / "A01.ome.tif", numpy.zeros((2, 16, 20), numpy.uint16), description=xml.encode(), metadata=None,
                     photometric="minisblack")
    run, _ = build(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    assert run.status == 2 and "promises 3 planes" in run.err and "has 2 pages" in run.err


@pytest.mark.parametrize("xml, word", [
    ('<?xml version="1.0"?><!DOCTYPE a [<!ENTITY b "c">]><OME><Image/></OME>', "DOCTYPE"),
    ("<OME><Image><Pixels", "broken"),
    ('<OME><Image ID="Image:0"></Image></OME>', "no Pixels"),
    ('<OME><Image><Pixels SizeC="99999999" SizeZ="99999" SizeT="9999"/></Image></OME>', "no sense"),
    ("<OME>" + "<a>" * 200 + "</a>" * 200 + "</OME>", "nested"),
])
def test_bad_ome(tmp_path, xml, word):
    tifffile.imwrite(tmp_path / "A01.tif", numpy.zeros((16, 20), numpy.uint16), description=xml.encode(), metadata=None)
    run, _ = build(tmp_path, "{well}.tif", channels=OME_CHANNELS)
    assert run.status == 2 and word in run.err


def test_ome_pixel_size_is_what_measuring_uses(tmp_path):
    # the resolution tags say 72 pixels an inch, a placeholder; the XML says 0.16 um
    ome(tmp_path / "a_near.ome.tif", (16, 20), "YX", ["near"])
    ome(tmp_path / "b_near.ome.tif", (16, 20), "YX", ["near"], PhysicalSizeX=0.2, PhysicalSizeY=0.2)
    (tmp_path / "s.csv").write_text("near,wide\na_near.ome.tif,\nb_near.ome.tif,\n")
    run = Run(["sheet", "check", str(tmp_path / "s.csv"), "--json"])
    found = json.loads(run.out)["findings"]
    assert [f["line"] for f in found if f["kind"] == "pixel_size"] == [3]
    assert any("0.2 um" in f["text"] and "0.16 um" in f["text"] for f in found)


def test_file_without_ome(tmp_path):
    tifffile.imwrite(tmp_path / "A01.tif", numpy.zeros((16, 20), numpy.uint16), metadata=None)
    run, _ = build(tmp_path, "{well}.tif", channels=OME_CHANNELS)
    assert run.status == 2 and "no OME-XML" in run.err and "--near-page" in run.err


# ---- layouts ---------------------------------------------------------------------------------------


BLOCKS = """my experiment,,,,
plate,p1,,,
treatment,1,2,3,4
a,vehicle,thrift,thrift,
b,vehicle,sedge,,sedge

dose (uM),1,2,3,4
A,,0.3,3,
B,,0.3,,3
plate: p2
Treatment,01,02,03,04,,,
A,thrift,thrift,vehicle,vehicle,,,
B,sedge,sedge,,,,,
"""


def plates(folder):
    pairs(folder, [f"{plate}_{row}{column:02d}" for plate in ("p1", "p2") for row in "AB" for column in (1, 2, 3, 4)])


def test_blocks_as_drawn(tmp_path):
    plates(tmp_path)
    (tmp_path / "layout.csv").write_text(BLOCKS)
    run, rows = build(tmp_path, "{plate}_{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert run.status == 0, run.err
    said = {(row["plate"], row["well"]): (row["treatment"], row["dose"], row["dose_unit"]) for row in rows}
    assert said["p1", "A01"] == ("vehicle", "", "") and said["p1", "A03"] == ("thrift", "3", "uM")
    assert said["p1", "B02"] == ("sedge", "0.3", "uM") and said["p1", "A04"] == ("", "", "")
    assert said["p2", "A01"] == ("thrift", "", "") and said["p2", "B03"] == ("", "", "")
    assert "blank: 2 wells, 2 of them with images (A04, B03)" in run.err


def test_blocks_side_by_side(tmp_path):
    pairs(tmp_path, ["A01", "A02", "B01", "B02"])
    (tmp_path / "layout.csv").write_text("treatment,1,2,,coating,1,2\nA,x,y,,A,marram,glass\nB,z,x,,B,glass,marram\n")
    rows = built(tmp_path, "{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert [(row["treatment"], row["coating"]) for row in rows] == [("x", "marram"), ("y", "glass"), ("z", "glass"), ("x", "marram")]


def test_a_title_that_is_a_plates_name(tmp_path):
    plates(tmp_path)
    block = "treatment,1,2,3,4\nA,{0},{0},{0},{0}\nB,{0},{0},{0},{0}\n"
    (tmp_path / "layout.csv").write_text("p1\n" + block.format("x") + "\np2\n" + block.format("y"))
    rows = built(tmp_path, "{plate}_{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert {(row["plate"], row["treatment"]) for row in rows} == {("p1", "x"), ("p2", "y")}


def test_two_blocks_for_one_well_are_refused(tmp_path):
    plates(tmp_path)
    block = "treatment,1,2,3,4\nA,{0},{0},{0},{0}\nB,{0},{0},{0},{0}\n"
    (tmp_path / "layout.csv").write_text(block.format("x") + "\n" + block.format("y"))
    run, _ = build(tmp_path, "{plate}_{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert run.status == 2 and "plate,NAME" in run.err


def test_a_layout_for_one_plate(tmp_path):
    plates(tmp_path)
    for plate, treatment in (("p1", "x"), ("p2", "y")):
        (tmp_path / f"{treatment}.csv").write_text("treatment,1,2,3,4\n" + "".join(f"{r}{(',' + treatment) * 4}\n" for r in "AB"))
    rows = built(tmp_path, "{plate}_{well}_{channel}.tif", "--layout", f"p1={tmp_path}/x.csv", "--layout", f"p2={tmp_path}/y.csv")
    assert {(row["plate"], row["treatment"]) for row in rows} == {("p1", "x"), ("p2", "y")}


@pytest.mark.parametrize("text, word", [
    (",1,2,3,4\nA,x,x,x,x\nB,x,x,x,x\n", "corner of the block is empty"),
    ("treatment,1,2,3,4\nA,x,x,x,x,x\nB,x,x,x,x\n", "right of the block's last column"),
    ("treatment,1,2,3,4\nA,x,x,x,x\nA,x,x,x,x\n", "comes twice"),
    ("tretment,1,2,3,4\nA,x,x,x,x\nB,x,x,x,x\n", "nearest is 'treatment'"),
    ("spots,1,2,3,4\nA,x,x,x,x\nB,x,x,x,x\n", "results"),
    ("treatment,1,2,3\nA,x,x,x\nB,x,x,x\n", "wells that the block does not draw (first: A04)"),
    ("hello\nworld\n", "neither a list"),
    ("well,treatment\nA01,x\nA1,y\nA02,x\nA03,x\nA04,x\nB01,x\nB02,x\nB03,x\nB04,x\n", "same place as line 2"),
    ("well,treatment\nA01,x\nA02,x\n", "no line for 12 of 16 images"),
    ("plate,well,treatment\np1,A01,x\n", "no line for 15 of 16 images"),
])
def test_layouts_that_cannot_be_used(tmp_path, text, word):
    plates(tmp_path)
    (tmp_path / "layout.csv").write_text(text)
    run, _ = build(tmp_path, "{plate}_{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert run.status == 2 and word in run.err, run.err
    assert not os.path.exists(tmp_path / "sheet.csv")


def test_lists_with_row_and_column_and_units_in_the_cell(tmp_path):
    pairs(tmp_path, ["A01", "A02", "B01"])
    (tmp_path / "layout.csv").write_bytes("Row;Column;Treatment;Dose\r\nA;1;thrift;10 \u00b5M\r\nA;2;thrift;500 nM\r\nB;01;thrift;0,05 \u00b5M\r\n".encode("latin-1"))
    rows = built(tmp_path, "{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert [(row["dose"], row["dose_unit"]) for row in rows] == [("10", "uM"), ("0.5", "uM"), ("0.05", "uM")]


def test_units_that_do_not_convert(tmp_path):
    pairs(tmp_path, ["A01", "A02"])
    (tmp_path / "layout.csv").write_text("well,treatment,dose\nA01,thrift,10 uM\nA02,thrift,3 ug/ml\n")
    run, _ = build(tmp_path, "{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert run.status == 2 and "uM" in run.err and "ug/ml" in run.err and "A02" in run.err


def test_workbooks_are_refused(tmp_path):
    pairs(tmp_path, ["A01"])
    (tmp_path / "layout.xlsx").write_bytes(b"PK\x03\x04" + bytes(50))
    run, _ = build(tmp_path, "{well}_{channel}.tif", "--layout", tmp_path / "layout.xlsx")
    assert run.status == 2 and "save the sheet as CSV UTF-8" in run.err


def test_wells_without_images_are_said(tmp_path):
    pairs(tmp_path, ["A01", "A02"])
    (tmp_path / "layout.csv").write_text("treatment,1,2,3\nA,x,y,z\nB,x,,\n")
    run, _ = build(tmp_path, "{well}_{channel}.tif", "--layout", tmp_path / "layout.csv")
    assert run.status == 0 and "2 wells of the drawing have no images: A03, B01" in run.err


def test_three_days_become_one_experiment(tmp_path):
    pairs(tmp_path, [f"{day}/{slip}_{field}" for day in ("mon", "wed", "fri") for slip in ("slip1", "slip2") for field in (1, 2)])
    for day in ("mon", "wed", "fri"):
        (tmp_path / f"{day}.ini").write_text("[pixel]\nsize_um = 0.16\n")
    (tmp_path / "days.csv").write_text("session,replicate,instrument\nmon,1,mon.ini\nwed,2,wed.ini\nfri,3,fri.ini\n")
    (tmp_path / "slips.csv").write_text("session,well,coating\n" + "".join(
        f"{day},slip{k},{coating}\n" for day in ("mon", "wed", "fri") for k, coating in ((1, "marram"), (2, "glass"))))
    rows = built(tmp_path, "{session}/{well}_{field}_{channel}.tif", "--vessel", "coverslip", "--layout", tmp_path / "days.csv",
                 "--layout", tmp_path / "slips.csv")
    assert len(rows) == 12 and {(row["session"], row["replicate"], row["instrument"]) for row in rows} == {
        ("mon", "1", "mon.ini"), ("wed", "2", "wed.ini"), ("fri", "3", "fri.ini")}
    assert {(row["well"], row["coating"]) for row in rows} == {("slip1", "marram"), ("slip2", "glass")}


def test_days_one_after_the_other(tmp_path):
    pairs(tmp_path, ["mon/A01", "mon/A02", "other names/x-A01-y"])
    base = ["--append", "-o", str(tmp_path / "s.csv"), *CHANNELS]
    first = ["sheet", "build", str(tmp_path / "mon"), "--name", "{well}_{channel}.tif", "--set", "plate=mon", "--set", "passage=11", *base]
    assert Run(first).status == 0
    second = ["sheet", "build", str(tmp_path / "other names"), "--name", "x-{well}-y_{channel}.tif", "--set", "plate=tue", "--set", "dish=2", *base]
    assert Run(second).status == 0
    assert [(row["near"], row["plate"], row["passage"], row["dish"]) for row in table(tmp_path / "s.csv")] == [
        ("mon/A01_near.tif", "mon", "11", ""), ("mon/A02_near.tif", "mon", "11", ""), ("other names/x-A01-y_near.tif", "tue", "", "2")]
    # the same day twice is one field in two rows, and the sheet stays as it was
    before = open(tmp_path / "s.csv").read()
    run = Run(first)
    assert run.status == 2 and "mon/A01" in run.err and open(tmp_path / "s.csv").read() == before


def test_any_name_of_a_coverslip_needs_the_vessel(tmp_path):
    pairs(tmp_path, ["left_1"])
    run, _ = build(tmp_path, "{well}_{field}_{channel}.tif")
    assert run.status == 2 and "--vessel coverslip" in run.err
    assert built(tmp_path, "{well}_{field}_{channel}.tif", "--vessel", "coverslip")[0]["well"] == "left"
    run, _ = build(tmp_path, "LEFT_{field}_{channel}.tif")
    assert run.status == 2 and "in other letters" in run.err


# ---- images yet to be made ----------------------------------------------------------------------------


def test_expect(tmp_path):
    (tmp_path / "layout.csv").write_text("plate,p1\ntreatment,1,2\nA,x,y\nB,,z\n")
    run = Run(["sheet", "build", "--expect", "-o", str(tmp_path / "s.csv"), "--name", "{plate}_{well}_{field}_{channel}.tif", *CHANNELS,
               "--layout", str(tmp_path / "layout.csv"), "--fields-per-well", "2"])
    assert run.status == 0, run.err
    rows = table(tmp_path / "s.csv")
    assert [row["near"] for row in rows] == [f"p1_{well}_{field}_near.tif" for well in ("A01", "A02", "B02") for field in (1, 2)]
    assert Run(["sheet", "check", str(tmp_path / "s.csv")]).status == 2
    # once the images are there, the same sheet comes from them
    pairs(tmp_path, [f"p1_{well}_{field}" for well in ("A01", "A02", "B02") for field in (1, 2)])
    assert built(tmp_path, "{plate}_{well}_{field}_{channel}.tif", "--layout", tmp_path / "layout.csv") == rows


@pytest.mark.parametrize("template, word", [("{plate}_{well}_{channel}.tif", "{plate}"), ("{*}_{well}_{channel}.tif", "{*}"),
                                            ("{well}.tif", "{channel}")])
def test_expect_needs_whole_names(tmp_path, template, word):
    (tmp_path / "layout.csv").write_text("treatment,1,2\nA,x,y\nB,,z\n")
    run = Run(["sheet", "build", "--expect", "-o", str(tmp_path / "s.csv"), "--name", template, *CHANNELS, "--layout",
               str(tmp_path / "layout.csv")])
    assert run.status == 2 and word in run.err


# ---- the demo's experiments --------------------------------------------------------------------------


@pytest.mark.parametrize("scenario, name, more, differs", [
    ("coatings", "{session}_{field}_{channel}.tif", ["--exclude", "{*}_flat_{*}.tif"], set()),
    ("doses", "{plate}_{well}_{channel}.tif", ["--vessel", "96"], {"acquired"}),
    ("screen", "{plate}_{well}_{channel}.tif", ["--vessel", "96"], {"acquired"}),
])
def test_demo_scenarios_from_folder_and_layouts(tmp_path, scenario, name, more, differs):
    assert Run(["demo", str(tmp_path), "--scenario", scenario]).status == 0
    rows = built(tmp_path, name, *more, "--layout", tmp_path / "layout.csv", "--layout", tmp_path / "sessions.csv", out="built.csv")
    true = table(tmp_path / "sheet.csv")
    key = lambda row: row["near"]
    strip = lambda row: {k: v for k, v in row.items() if k not in differs}  # what no layout says
    assert [strip(row) for row in sorted(rows, key=key)] == [strip(row) for row in sorted(true, key=key)]
    assert Run(["sheet", "check", str(tmp_path / "built.csv")]).status == 0


def test_the_sheet_is_whole_or_not_there(tmp_path):
    pairs(tmp_path, ["A01"])
    touch(tmp_path, "notes")
    run = Run(["sheet", "build", str(tmp_path), "-o", str(tmp_path / "notes/s.csv"), "--name", "{well}_{channel}.tif", *CHANNELS])
    assert run.status == 3


def test_json(tmp_path):
    pairs(tmp_path, ["p1_A01", "p1_A02"])
    run = Run(["sheet", "build", str(tmp_path), "-o", str(tmp_path / "s.csv"), "--name", "{plate}_{well}_{channel}.tif", *CHANNELS, "--json"])
    found = json.loads(run.out)
    assert (found["rows"], found["wells"], found["plates"], found["written"]) == (2, 2, 1, 1) and run.err == ""


def test_usage(tmp_path):
    for arguments, word in ((["-o", "s.csv", "--name", "{well}.tif"], "folder"), ([str(tmp_path), "--name", "{well}.tif"], "-o"),
                            ([str(tmp_path), "-o", "s.csv"], "--name"), ([str(tmp_path), "-o", "s.csv", "--name", "{well}.tif"], "--near-channel"),
                            ([str(tmp_path), "-o", "s.csv", "--nam", "x"], "--name")):
        run = Run(["sheet", "build", *arguments], cwd=str(tmp_path))
        assert run.status == 2 and word in run.err, run.err


def test_ome_with_several_images_in_a_file(tmp_path):
    with tifffile.TiffWriter(tmp_path / "A01.ome.tif", ome=True) as file:
        for _ in range(3):
            file.write(numpy.zeros((2, 16, 20), numpy.uint16), photometric="minisblack",
                       metadata={"axes": "CYX", "Channel": {"Name": ["near488", "wide488"]}})
    rows = built(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    assert [(row["field"], row["near_page"], row["wide_page"]) for row in rows] == [("1", "1", "2"), ("2", "3", "4"), ("3", "5", "6")]
    # every page has its own image's size, and the sheet can be checked
    assert Run(["sheet", "check", str(tmp_path / "sheet.csv")]).status == 0


def test_many_time_points(tmp_path):
    ome(tmp_path / "A01.ome.tif", (300, 2, 16, 20), "TCYX", ["near488", "wide488"], TimeIncrement=60, TimeIncrementUnit="s")
    rows = built(tmp_path, "{well}.ome.tif", channels=OME_CHANNELS)
    assert len(rows) == 300 and rows[-1]["time_min"] == "299"
    assert Run(["sheet", "check", str(tmp_path / "sheet.csv")]).status == 0


def test_instrument_files_are_found_beside_who_names_them(tmp_path):
    pairs(tmp_path, ["images/p1_A01", "images/p2_A01"])
    os.makedirs(tmp_path / "bench")
    for name in ("bench/mon.ini", "here.ini"):
        (tmp_path / name).write_text("[pixel]\nsize_um = 0.16\n")
    (tmp_path / "bench/days.csv").write_text("plate,instrument\np1,mon.ini\np2,/elsewhere/none.ini\n")
    base = ["sheet", "build", "images", "-o", "sheets/s.csv", "--name", "{plate}_{well}_{channel}.tif", *CHANNELS]
    assert Run([*base, "--layout", "bench/days.csv"], cwd=str(tmp_path)).status == 0
    assert [row["instrument"] for row in table(tmp_path / "sheets/s.csv")] == ["../bench/mon.ini", "/elsewhere/none.ini"]
    assert Run([*base, "--set", "instrument=here.ini"], cwd=str(tmp_path)).status == 0
    assert {row["instrument"] for row in table(tmp_path / "sheets/s.csv")} == {"../here.ini"}
