# SPDX-License-Identifier: GPL-3.0-or-later
"""sheet check: every fault at once, and what spreadsheets do to a sheet. Expected lines and columns are counted by hand in
the sheets written here; images are made by tifffile, another writer than the program's own."""
import json
import os

import numpy
import pytest
import tifffile

from conftest import Run

SIZE_UM = 0.16


def image(path, shape=(32, 40), size_um=SIZE_UM, pages=1, **more):
    os.makedirs(os.path.dirname(path), exist_ok=True)
    data = numpy.zeros(shape if pages == 1 else (pages, *shape), numpy.uint16)
    resolution = dict(resolution=(1e4 / size_um, 1e4 / size_um), resolutionunit="CENTIMETER") if size_um else {}
    tifffile.imwrite(path, data, photometric="minisblack", metadata=None, **resolution, **more)


def check(sheet, *more):
    """Exit status and findings of sheet check --json."""
    run = Run(["sheet", "check", sheet, "--json", *more])
    return run.status, json.loads(run.out)


def faults(found, severity="fault"):
    return [f for f in found["findings"] if f["severity"] == severity]


def write(path, text, encoding="utf-8"):
    path.write_bytes(text.encode(encoding))
    return str(path)


@pytest.fixture
def folder(tmp_path):
    """Four good image pairs, a.. to d.."""
    for name in "abcd":
        image(f"{tmp_path}/{name}_near.tif")
        image(f"{tmp_path}/{name}_wide.tif")
    return tmp_path


GOOD = ("near,wide,plate,well,treatment,role,replicate\n"
        "a_near.tif,a_wide.tif,p1,A01,vehicle,control,1\n"
        "b_near.tif,b_wide.tif,p1,A02,thrift,sample,1\n"
        "c_near.tif,c_wide.tif,p2,A01,vehicle,control,2\n"
        "d_near.tif,d_wide.tif,p2,A02,thrift,sample,2\n")


def test_a_good_sheet_has_no_fault(folder):
    status, found = check(write(folder / "s.csv", GOOD))
    assert status == 0 and not faults(found)
    assert (found["rows"], found["images"], found["plates"]) == (4, 8, 2)


def test_twelve_faults_in_one_run(folder):
    image(f"{folder}/small_wide.tif", shape=(32, 41))
    image(f"{folder}/other_pixel_near.tif", size_um=0.2)
    (folder / "cut.tif").write_bytes(open(folder / "a_near.tif", "rb").read()[:60])
    sheet = write(folder / "s.csv",
                  "near,wide,plate,well,vessel,treatment,dose,dose_unit,role,near_page,time_min,acquired,spread_area_um2\n"
                  "a_near.tif,a_wide.tif,p1,A01,96,vehicle,0,uM,control,,0,2030-05-06T09:00:00,\n"
                  "gone_near.tif,b_wide.tif,p1,A02,96,thrift,1,uM,sample,,0,,\n"        # 3: missing
                  "cut.tif,b_wide.tif,p1,A03,96,thrift,1,uM,sample,,0,,\n"              # 4: cut short
                  "b_near.tif,small_wide.tif,p1,A04,96,thrift,1,uM,sample,,0,,\n"       # 5: sizes differ
                  "other_pixel_near.tif,c_wide.tif,p1,A05,96,thrift,1,uM,sample,,0,,\n"  # 6: another pixel size
                  "c_near.tif,c_wide.tif,p1,A01,96,thrift,1,uM,sample,,0,,\n"           # 7: the field of line 2
                  "d_near.tif,d_wide.tif,p1,I07,96,thrift,1,uM,sample,,0,,\n"           # 8: no such well
                  "d_near.tif,c_wide.tif,p1,B01,96,thrift,1,ug/ml,sample,3,0,,\n"       # 9: unit; page out of range
                  "d_near.tif,d_near.tif,p1,B02,96,thrift,1,uM,contol,1,0,,\n"          # 10: role; near is wide
                  "a_near.tif,a_wide.tif,p1,B03,96,thrift,\"1,000\",uM,sample,,soon,6/5/2030,\n")  # 11: three cells, twin image
    status, found = check(sheet)
    assert status == 2
    kinds = {(f["line"], f["column"], f["kind"]) for f in faults(found)}
    assert kinds >= {(1, "spread_area_um2", "result_column"), (3, "near", "missing_file"), (4, "near", "image"),
                     (5, "wide", "size"), (6, "near", "pixel_size"), (7, None, "duplicate_field"), (8, "well", "well"),
                     (9, "dose_unit", "unit"), (9, "near", "image"), (10, "role", "role"), (10, "wide", "same_image"),
                     (11, "dose", "number"), (11, "time_min", "number"), (11, "acquired", "time"),
                     (11, "near", "duplicate_image")}
    assert len({kind for _, _, kind in kinds}) >= 12
    lines = [f["line"] for f in found["findings"] if f["line"]]
    assert lines == sorted(lines)


def test_words_name_file_line_column_and_mend(folder):
    sheet = write(folder / "s.csv", GOOD.replace("A02,thrift,sample,1", "A02,thrift,smple,1"))
    run = Run(["sheet", "check", sheet])
    assert run.status == 2
    assert f"{sheet}:3: role: 'smple' is no role" in run.out and "nearest is 'sample'" in run.out
    assert "1 fault" in run.err


def test_quiet_keeps_faults_only(folder):
    sheet = write(folder / "s.csv", GOOD)
    assert Run(["sheet", "check", sheet, "--quiet"]).out == ""
    assert "replicates" in Run(["sheet", "check", sheet]).out


def test_hundreds_of_one_kind_are_counted(folder):
    rows = "".join(f"x{k}.tif,y{k}.tif\n" for k in range(200))
    sheet = write(folder / "s.csv", "near,wide\n" + rows)
    run = Run(["sheet", "check", sheet])
    assert run.status == 2 and "and 388 more faults of this kind (missing_file), on lines 8 to 201" in run.out
    assert len(faults(check(sheet)[1])) == 400


@pytest.mark.parametrize("column", ["spread_area_um2", "field_id", "flags", "depth_nm", "gap_median_nm"])
def test_columns_of_the_results_are_refused_by_name(folder, column):
    text = "\n".join(line + ("," + column if k == 0 else ",1" if line else "") for k, line in enumerate(GOOD.split("\n")))
    status, found = check(write(folder / "s.csv", text))
    assert status == 2 and [f["column"] for f in faults(found)] == [column]


def test_extra_columns_are_welcome(folder):
    text = "\n".join(line + (",passage" if k == 0 else ",12" if line else "") for k, line in enumerate(GOOD.split("\n")))
    assert check(write(folder / "s.csv", text))[0] == 0


@pytest.mark.parametrize("name, near", [("tretment", "treatment"), ("wel", "well"), ("dose_units", "dose_unit")])
def test_misspelled_columns_are_refused_with_the_nearest(folder, name, near):
    status, found = check(write(folder / "s.csv", GOOD.replace("near,wide,", f"near,wide,{name},", 1).replace(".tif,p", ".tif,x,p")))
    assert status == 2 and near in faults(found)[0]["text"]


# ---- what spreadsheets write ------------------------------------------------------------------


@pytest.mark.parametrize("change", [
    lambda t: t.replace("\n", "\r\n").encode(),
    lambda t: b"\xef\xbb\xbf" + t.encode(),
    lambda t: t.replace(",", ";").encode(),
    lambda t: ("sep=;\r\n" + t.replace(",", ";").replace("\n", "\r\n")).encode(),
    lambda t: t.replace(",", "\t").encode(),
    lambda t: t.replace("\n", "\r").encode(),
    lambda t: t.replace("near,", "Near,").replace("well", "Well").encode(),
    lambda t: (t + ",,,,,,\n,,,,,,\n").encode(),
])
def test_spreadsheets_are_understood(folder, change):
    (folder / "s.csv").write_bytes(change(GOOD))
    status, found = check(str(folder / "s.csv"))
    assert status == 0 and found["rows"] == 4 and not faults(found)


def test_lines_are_those_of_the_file_below_a_sep_line(folder):
    text = "sep=;\n" + GOOD.replace("thrift,sample,2", "thrift,smple,2").replace(",", ";")
    _, found = check(write(folder / "s.csv", text))
    assert [f["line"] for f in faults(found)] == [6]


def test_decimal_commas(folder):
    text = GOOD.replace("replicate", "replicate,dose").replace(",1\n", ',1,"0,3"\n').replace(",2\n", ',2,"12,5 uM"\n')
    status, found = check(write(folder / "s.csv", text))
    # vehicle and thrift each have 0.3 without a unit and 12.5 uM: what a unit is missing from is not guessed
    assert status == 2 and {f["kind"] for f in faults(found)} == {"unit"}
    text = text.replace("0,3", "0,3 uM")
    status, found = check(write(folder / "s.csv", text))
    assert status == 0 and any("decimal comma" in f["text"] for f in faults(found, "note"))


@pytest.mark.parametrize("number", ["1,000", "1.000,5", "12,345 uM", "1 000", "10-20 uM", "ten"])
def test_unclear_numbers_are_refused(folder, number):
    text = GOOD.replace("replicate", "replicate,dose").replace(",1\n", f',1,"{number}"\n').replace(",2\n", ",2,\n")
    status, found = check(write(folder / "s.csv", text))
    assert status == 2 and {f["kind"] for f in faults(found)} == {"number"}


def test_backslashes_are_read_and_drives_refused(folder):
    os.makedirs(folder / "sub")
    os.rename(folder / "a_near.tif", folder / "sub/a_near.tif")
    status, found = check(write(folder / "s.csv", GOOD.replace("a_near.tif", "sub\\a_near.tif")))
    assert status == 0 and any("backslash" in f["text"] for f in faults(found, "note"))
    status, found = check(write(folder / "s.csv", GOOD.replace("a_near.tif", "D:\\data\\a_near.tif")))
    assert status == 2 and "--root" in faults(found)[0]["text"]


@pytest.mark.parametrize("first", [b"PK\x03\x04rest of a workbook", b"\xd0\xcf\x11\xe0old workbook", b"\xff\xfen\x00e\x00"])
def test_workbooks_are_refused_with_the_mend(folder, first):
    (folder / "s.xlsx").write_bytes(first)
    run = Run(["sheet", "check", str(folder / "s.xlsx")])
    assert run.status == 2 and "CSV UTF-8" in run.err


def test_latin1_is_read_and_said(folder):
    text = GOOD.replace("thrift", "\u00e9pice").replace("replicate", "replicate,dose").replace(",1\n", ",1,3 \u00b5M\n").replace(",2\n", ",2,3 \u00b5M\n")
    status, found = check(write(folder / "s.csv", text, "latin-1"))
    assert status == 0 and any("not UTF-8" in f["text"] for f in faults(found, "note"))
    assert "p1/A01" not in json.dumps(faults(found))


def test_root(folder):
    os.makedirs(folder / "elsewhere")
    sheet = write(folder / "elsewhere/s.csv", GOOD)
    assert check(sheet)[0] == 2
    assert check(sheet, "--root", str(folder))[0] == 0


def test_a_file_of_commas_is_no_sheet(folder):
    status, found = check(write(folder / "s.csv", "near,wide\n" + "," * 200000 + "\n"))
    assert status == 2 and "200001 columns" in json.dumps(found)


# ---- what to look at ---------------------------------------------------------------------------


def warnings(found):
    return {f["kind"] for f in faults(found, "warning")}


def test_no_control(folder):
    _, found = check(write(folder / "s.csv", GOOD.replace("control", "sample")))
    assert "no_control" in warnings(found)
    _, found = check(write(folder / "s.csv", GOOD.replace("p2,A01,vehicle,control", "p2,A01,vehicle,sample")))
    assert any("p2" in f["text"] for f in faults(found, "warning") if f["kind"] == "no_control")
    assert "no_control" not in warnings(check(write(folder / "s.csv", GOOD))[1])


def rows(*lines):
    """A sheet whose images are not there: warnings do not need them."""
    return "near,wide,plate,well,treatment,role,replicate,session\n" + "".join(
        f"n{k}.tif,w{k}.tif,{line}\n" for k, line in enumerate(lines))


@pytest.mark.parametrize("column, value", [("treatment", "sedge"), ("role", "positive"), ("replicate", "2")])
def test_fields_of_one_well_share_what_was_done(folder, column, value):
    columns = ["plate", "well", "treatment", "role", "replicate", "field"]
    first = dict(zip(columns, ["p1", "A01", "thrift", "sample", "1", "1"]))
    second = dict(first, field="2")
    header = "near,wide," + ",".join(columns) + "\n"
    text = lambda a, b: header + "".join(f"n{k}.tif,w{k}.tif," + ",".join(r[c] for c in columns) + "\n" for k, r in enumerate((a, b)))
    kinds = lambda text: [(f["line"], f["column"]) for f in faults(check(write(folder / "s.csv", text))[1]) if f["kind"] == "two_in_one_well"]
    assert kinds(text(first, second)) == []
    assert kinds(text(first, dict(second, **{column: value}))) == [(3, column)]
    assert kinds(text(first, dict(second, well="A02", **{column: value}))) == []


def test_one_plate_has_one_vessel(folder):
    text = GOOD.replace("replicate\n", "replicate,vessel\n").replace(",1\n", ",1,96\n").replace(",2\n", ",2,24\n")
    assert check(write(folder / "s.csv", text))[0] == 0  # two plates
    assert [f["kind"] for f in faults(check(write(folder / "s.csv", text.replace("p2", "p1").replace("A01,vehicle,control,2", "A03,x,control,2")
                                            .replace("A02,thrift,sample,2", "A04,thrift,sample,2")))[1])] == ["vessel"]


@pytest.mark.parametrize("time, good", [("2030-05-06T09:00:00", True), ("2030-05-06 09:00", True), ("2030-05-06T09:00:00.25Z", True),
                                        ("2030-05-06T09:00:00+02:00", True), ("2030-13-06T09:00", False), ("2030-05-06T29:00", False),
                                        ("06.05.2030 09:00", False), ("2030-05-06", False), ("9:00", False)])
def test_times(folder, time, good):
    text = GOOD.replace("replicate\n", "replicate,acquired\n").replace(",1\n", f",1,{time}\n").replace(",2\n", ",2,\n")
    assert (check(write(folder / "s.csv", text))[0] == 0) == good


def test_wells_numbered_as_replicates(folder):
    wells = [f"p1,{row}{column:02d},{treatment},{role},{column},d1" for row, treatment, role in
             (("A", "vehicle", "control"), ("B", "thrift", "sample")) for column in (1, 2, 3)]
    assert "numbered_wells" in warnings(check(write(folder / "s.csv", rows(*wells)))[1])
    days = [f"p{day},{row}01,{treatment},{role},{day},d{day}" for row, treatment, role in
            (("A", "vehicle", "control"), ("B", "thrift", "sample")) for day in (1, 2, 3)]
    found = check(write(folder / "s.csv", rows(*days)))[1]
    assert "numbered_wells" not in warnings(found) and "replicates" not in warnings(found)


@pytest.mark.parametrize("name", ["1-Sep", "Sep-07", "01/09/2024", "2024-09-01 00:00:00", "1.20E+05", "#NAME?", "########"])
def test_names_that_a_spreadsheet_made(folder, name):
    found = check(write(folder / "s.csv", GOOD.replace("thrift", name)))[1]
    assert "spreadsheet" in warnings(found)


@pytest.mark.parametrize("name", ["thrift", "t01", "TX-29", "sept-inhibitor", "4-AP", "2-APB", "E1", "12/2", "a#1"])
def test_names_that_are_names(folder, name):
    assert "spreadsheet" not in warnings(check(write(folder / "s.csv", GOOD.replace("thrift", name)))[1])


def test_names_that_differ_in_capitals(folder):
    assert "twin_names" in warnings(check(write(folder / "s.csv", GOOD.replace("d_wide.tif,p2,A02,thrift", "d_wide.tif,p2,A02,Thrift")))[1])


@pytest.mark.parametrize("name, seen", [("thrift 10 uM", True), ("10 nM thrift", False), ("thrift_3uM", True), ("thrift (5 %)", True),
                                        ("thrift 2", False), ("CD 44", False), ("thrift 5 days", False)])
def test_doses_in_the_name_of_a_treatment(folder, name, seen):
    found = check(write(folder / "s.csv", GOOD.replace("thrift", name)))[1]
    assert ("dose_in_name" in warnings(found)) == seen


def test_pooling(folder):
    sheet = write(folder / "s.csv", "near,wide,plate,well,coating\na_near.tif,a_wide.tif,p1,A1,marram\n"
                                    "b_near.tif,b_wide.tif,p1,A2,marram\n")
    assert check(sheet)[0] == 0
    status, found = check(sheet, "--reference", "pooled")
    assert status == 2 and faults(found)[0]["kind"] == "pooling"
    sheet = write(folder / "s.csv", "near,wide,plate,well,coating,treatment\na_near.tif,a_wide.tif,p1,A1,marram,x\n"
                                    "b_near.tif,b_wide.tif,p1,A2,marram,y\n")
    status, found = check(sheet, "--reference", "pooled")
    assert status == 0 and "pooling" in warnings(found)


# ---- instruments and pages ------------------------------------------------------------------------


def test_instrument_files_of_rows(folder):
    text = GOOD.replace("replicate\n", "replicate,instrument\n").replace(",1\n", ",1,day1.ini\n").replace(",2\n", ",2,day2.ini\n")
    (folder / "day1.ini").write_text("[pixel]\nsize_um = 0.16\n")
    (folder / "day2.ini").write_text("[pixel]\nsise_um = 0.16\n")
    status, found = check(write(folder / "s.csv", text))
    assert status == 2
    fault, = faults(found)
    assert fault["line"] == 4 and fault["column"] == "instrument" and "day2.ini:2" in fault["text"] and "size_um" in fault["text"]
    os.remove(folder / "day2.ini")
    assert "day2.ini" in faults(check(str(folder / "s.csv"))[1])[0]["text"]


def test_a_series_needs_a_page_an_angle(folder):
    for name in "abcd":
        image(f"{folder}/{name}_near.tif", pages=3)
    (folder / "bench.ini").write_text("[series]\nangles_deg = 66, 68, 70\n")
    sheet = write(folder / "s.csv", GOOD)
    assert check(sheet, "-i", str(folder / "bench.ini"))[0] == 0
    image(f"{folder}/d_near.tif", pages=2)
    status, found = check(sheet, "-i", str(folder / "bench.ini"))
    assert status == 2 and faults(found)[0]["line"] == 5 and "2 pages" in faults(found)[0]["text"]


def test_sessions_may_differ_in_size(folder):
    text = GOOD.replace("replicate\n", "replicate,session\n").replace(",1\n", ",1,s1\n").replace(",2\n", ",2,s2\n")
    for name in "cd":
        image(f"{folder}/{name}_near.tif", shape=(50, 60), size_um=0.1)
        image(f"{folder}/{name}_wide.tif", shape=(50, 60), size_um=0.1)
    status, found = check(write(folder / "s.csv", text))
    assert status == 0 and "size" in warnings(found)
    assert check(write(folder / "s.csv", GOOD))[0] == 2


def test_no_pixel_size_anywhere(folder):
    for name in "abcd":
        image(f"{folder}/{name}_near.tif", size_um=None)
    sheet = write(folder / "s.csv", GOOD)
    assert "pixel_size" in warnings(check(sheet)[1])
    (folder / "bench.ini").write_text("[pixel]\nsize_um = 0.16\n")
    assert "pixel_size" not in warnings(check(sheet, "-i", str(folder / "bench.ini"))[1])


def test_usage(folder):
    assert Run(["sheet", "check"]).status == 2
    assert "sheet check" in Run(["sheet", "chek", "x"]).err
    assert "--root" in Run(["sheet", "check", "x.csv", "--rot", "y"]).err
    assert Run(["sheet", "check", str(folder / "none.csv")]).status == 2
    assert Run(["sheet"]).status == 2 and Run(["sheet", "--help"]).status == 0
    assert Run(["sheet", "check", "--help"]).status == 0
