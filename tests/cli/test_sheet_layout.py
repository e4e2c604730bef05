# SPDX-License-Identifier: GPL-3.0-or-later
"""sheet layout: what is drawn is what sheet build reads back, and what the pipetting order says. What must hold for every seed
(controls in every quarter, blocks, edges) is checked over a thousand plates in tests/sheet/test_draw.c."""
import collections
import csv
import json
import os

import pytest
from PIL import Image

from conftest import Run, tree

DOSES = "samphire: 0.03, 0.1, 0.3, 1, 3, 10, 30, 100 uM"
CHANNELS = ["--near-channel", "near", "--wide-channel", "wide"]


def table(path):
    with open(path, newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def draw(folder, *more, status=0):
    run = Run(["sheet", "layout", *more, "-o", str(folder / "l.csv")])
    assert run.status == status, run.err
    return run


def read_back(folder, *layouts, vessel="96"):
    arguments = [word for layout in layouts for word in ("--layout", str(folder / layout))]
    run = Run(["sheet", "build", "--expect", "-o", str(folder / "s.csv"), "--name", "{plate}_{well}_{channel}.tif", *CHANNELS,
               "--vessel", vessel, *arguments])
    assert run.status == 0, run.err
    return table(folder / "s.csv")


def places(rows):
    return sorted((row["plate"], row["well"], row["treatment"], row.get("dose", ""), row.get("dose_unit", "") if row.get("dose") else "",
                   row["role"]) for row in rows)


def test_what_is_drawn_is_read_back(tmp_path):
    draw(tmp_path, "--treatment", DOSES, "--treatment", "thrift: 5, 50 nM", "--treatment", "sedge", "--control", "vehicle",
         "--positive", "releaser", "--plates", "40", "--seed", "7")
    drawn, rows = table(tmp_path / "l_pipetting.csv"), read_back(tmp_path, "l.csv", "l_plates.csv")
    assert places(drawn) == places(rows) and len(rows) == 40 * (11 * 3 + 16)
    assert {(row["plate"], row["replicate"]) for row in rows} == {(f"plate{k}", str(k)) for k in range(1, 41)}
    assert {row["block"] for row in rows} == {"1", "2", "3"}
    # each block of each plate holds every dose once
    counts = collections.Counter((row["plate"], row["block"], row["treatment"], row["dose"]) for row in rows if row["role"] == "sample")
    assert set(counts.values()) == {1} and len(counts) == 40 * 3 * 11


@pytest.mark.parametrize("vessel", ["24", "48", "96", "384", "1536"])
def test_every_plate(tmp_path, vessel):
    draw(tmp_path, "--treatment", "thrift: 1, 10 uM", "--control", "vehicle", "--vessel", vessel, "--seed", "3")
    assert places(table(tmp_path / "l_pipetting.csv")) == places(read_back(tmp_path, "l.csv", vessel=vessel))
    with Image.open(tmp_path / "l_map.png") as picture:
        assert picture.mode == "P" and picture.width >= 400 and picture.height >= 200


def test_units_that_differ_stand_in_the_cells(tmp_path):
    draw(tmp_path, "--treatment", "thrift: 1, 10 uM", "--treatment", "serum: 0.5, 5 %", "--control", "vehicle", "--seed", "3")
    rows = read_back(tmp_path, "l.csv")
    assert {(row["treatment"], row["dose"], row["dose_unit"]) for row in rows} == {
        ("thrift", "1", "uM"), ("thrift", "10", "uM"), ("serum", "0.5", "%"), ("serum", "5", "%"), ("vehicle", "", "")}


def test_pipetting_goes_from_low_to_high(tmp_path):
    draw(tmp_path, "--treatment", "samphire: 100, 1, 10 uM", "--control", "vehicle", "--seed", "1")
    steps = table(tmp_path / "l_pipetting.csv")
    assert [row["step"] for row in steps] == [str(k) for k in range(1, len(steps) + 1)]
    assert [row["dose"] for row in steps if row["treatment"] == "samphire"] == ["1"] * 3 + ["10"] * 3 + ["100"] * 3


def test_a_list(tmp_path):
    (tmp_path / "list.csv").write_text("treatment;dose;role;wells\nvehicle;;control;6\nthrift;0,5 uM;;4\nthrift;500 nM;;4\n")
    draw(tmp_path, str(tmp_path / "list.csv"), "--seed", "1", status=2)  # 0.5 uM and 500 nM are one dose
    (tmp_path / "list.csv").write_text("treatment;dose;role;wells\nvehicle;;control;6\nthrift;0,5 uM;;4\nthrift;50 nM;;4\nreleaser;;positive;\n")
    draw(tmp_path, str(tmp_path / "list.csv"), "--seed", "1", "--wells", "2")
    counts = collections.Counter((row["treatment"], row["dose"], row["role"]) for row in table(tmp_path / "l_pipetting.csv"))
    assert counts == {("vehicle", "", "control"): 6, ("thrift", "0.5", "sample"): 4, ("thrift", "0.05", "sample"): 4,
                      ("releaser", "", "positive"): 2}


def test_coatings(tmp_path):
    (tmp_path / "list.csv").write_text("coating,treatment,role\nmarram,vehicle,control\nmarram,thrift,\nglass,vehicle,control\nglass,thrift,\n")
    draw(tmp_path, str(tmp_path / "list.csv"), "--wells", "4", "--vessel", "24", "--seed", "1")
    drawn, rows = table(tmp_path / "l_pipetting.csv"), read_back(tmp_path, "l.csv", vessel="24")
    key = lambda row: (row["well"], row["treatment"], row["coating"], row["role"])
    assert sorted(map(key, drawn)) == sorted(map(key, rows)) and len(rows) == 16
    (tmp_path / "list.csv").write_text("coating\nmarram\nglass\n")
    draw(tmp_path, str(tmp_path / "list.csv"), "--seed", "1")
    assert {row["coating"] for row in read_back(tmp_path, "l.csv")} == {"marram", "glass"}


@pytest.mark.parametrize("text, line, word", [
    ("treatment,dose\nthrift,ten\n", 2, "no dose"), ("treatment,role\nthrift,contrl\n", 2, "no role"),
    ("treatment,wells\nthrift,0\n", 2, "number of wells"), ("treatment,dosage\nthrift,1\n", 1, "dosage"),
    ("compound\nthrift\n", 1, "no column treatment"), ("treatment,dose\nthrift,1 uM\nthrift,1 ug/ml\n", 3, "do not convert"),
])
def test_faults_of_a_list_name_the_line(tmp_path, text, line, word):
    (tmp_path / "list.csv").write_text(text)
    run = draw(tmp_path, str(tmp_path / "list.csv"), status=2)
    assert f"list.csv:{line}:" in run.err and word in run.err and not os.path.exists(tmp_path / "l.csv")


def test_the_same_seed_is_the_same_plate(tmp_path):
    base = ["--treatment", DOSES, "--control", "vehicle", "--plates", "2"]
    folders = [tmp_path / name for name in "abc"]
    for folder, seed in zip(folders, ("7", "7", "8")):
        folder.mkdir()
        draw(folder, *base, "--seed", seed)
    assert tree(folders[0]) == tree(folders[1]) and tree(folders[0]) != tree(folders[2])


def test_a_seed_not_given_is_printed(tmp_path):
    seed = draw(tmp_path, "--treatment", DOSES, "--control", "vehicle").out.split("--seed ")[1].strip()
    first = tree(tmp_path)
    draw(tmp_path, "--treatment", DOSES, "--control", "vehicle", "--seed", seed)
    assert tree(tmp_path) == first


def test_json_and_advice(tmp_path):
    found = json.loads(draw(tmp_path, "--treatment", DOSES, "--control", "vehicle", "--seed", "5", "--json").out)
    assert (found["seed"], found["arms"], found["wells_used"], found["blocks"], found["quarters_without_control"]) == (5, 9, 32, 3, 0)
    assert "No control" in draw(tmp_path, "--treatment", DOSES).out
    assert "at least 4 control wells" in draw(tmp_path, "--treatment", DOSES, "--control", "vehicle", "--control-wells", "2").out


@pytest.mark.parametrize("arguments, word", [
    ([], "needs treatments"), (["--treatment", "x", "--vessel", "97"], "--vessel"), (["--treatment", "x", "--edge", "no"], "auto, use or leave"),
    (["--treatment", "x: 1, two uM"], "expected doses"), (["--treatment", "x", "--wells", "97"], "97 wells"), (["--treatment", "x", "--seed", "-1"], "--seed"),
    (["--treatment", "x", "--treatment", "x"], "twice"), (["--treatment", ": 1 uM"], "without a name"), (["--treatment", "x", "--plates", "0"], "--plates"),
])
def test_usage(tmp_path, arguments, word):
    assert word in draw(tmp_path, *arguments, status=2).err
    assert os.listdir(tmp_path) == []


def test_names_with_commas_and_quotes(tmp_path):
    draw(tmp_path, "--treatment", 'a, "b"', "--control", "vehicle", "--seed", "2")
    assert places(table(tmp_path / "l_pipetting.csv")) == places(read_back(tmp_path, "l.csv"))
