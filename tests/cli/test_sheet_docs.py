# SPDX-License-Identifier: GPL-3.0-or-later
"""The starts of docs/sheets.md: the folders it lists are made, its layouts written, its commands run, and what it shows must be
what comes out."""
import os
import re
import shlex
import subprocess

import numpy
import pytest
import tifffile

from conftest import PROGRAM, ROOT

PAGE = open(os.path.join(ROOT, "docs/sheets.md"), encoding="utf-8").read()
STARTS = re.split(r"^## (?=Start \d)", PAGE, flags=re.M)[1:]


def make_file(folder, line):
    name, _, channels = line.partition("channels:")
    path = os.path.join(folder, name.strip())
    os.makedirs(os.path.dirname(path), exist_ok=True)
    if channels:
        names = [word.strip() for word in channels.split(",")]
        tifffile.imwrite(path, numpy.zeros((len(names), 16, 20), numpy.uint16), ome=True, photometric="minisblack",
                         metadata={"axes": "CYX", "Channel": {"Name": names}, "PhysicalSizeX": 0.1, "PhysicalSizeY": 0.1})
    else:
        open(path, "wb").close()


def run(command, folder):
    words = shlex.split(command.replace("\\\n", " "))
    assert words[0] == "underfoot"
    done = subprocess.run([PROGRAM, *words[1:]], cwd=folder, capture_output=True, text=True)
    assert done.returncode == 0, (command, done.stdout, done.stderr)


@pytest.mark.parametrize("start", STARTS, ids=[s.split("\n")[0] for s in STARTS])
def test_start(tmp_path, start):
    start = start.split("\n## ")[0]
    results = 0
    for kind, text in re.findall(r"^```(\w+)\n(.*?)^```$", start, re.M | re.S):
        before = start[:start.index(text)].rstrip("`csvfilesh\n").rstrip().split("\n")[-1]
        if kind == "files":
            for line in text.strip().split("\n"):
                make_file(tmp_path, line)
        elif kind == "sh":
            for command in re.split(r"\n(?=underfoot)", text.strip()):
                run(command, tmp_path)
        else:
            name = re.match(r"`([^`]+)`, ", before).group(1)
            if "made" not in before:
                (tmp_path / name).write_text(text)
                continue
            found = (tmp_path / name).read_text()
            assert found == text if "begins" not in before else found.startswith(text)
            results += 1
    assert results == 1


def test_there_are_five():
    assert len(STARTS) == 5
