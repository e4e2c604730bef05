"""The house rules, held: who may include whom, who may open files, print or exit. Checked against src/layers.txt."""
import glob
import os
import re
import subprocess

import pytest

ROOT = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
OBJECTS = os.path.join(ROOT, "build/release/obj")


def read_layers():
    allowed = {}
    for line in open(os.path.join(ROOT, "src/layers.txt")):
        line = line.split("#")[0].strip()
        if line:
            layer, names = line.split(":")
            allowed[layer.strip()] = set(names.split())
    return allowed


def broken_includes(root, allowed):
    broken = []
    for path in sorted(glob.glob(os.path.join(root, "src/*/*.[ch]"))):
        layer = os.path.basename(os.path.dirname(path))
        for other in re.findall(r'^#include "(\w+)/', open(path).read(), re.M):
            if other != layer and other not in allowed.get(layer, set()):
                broken.append(f"{os.path.relpath(path, root)} includes {other}")
    return broken


def test_every_folder_has_a_rule():
    folders = {os.path.basename(d.rstrip("/")) for d in glob.glob(os.path.join(ROOT, "src/*/"))}
    assert folders == set(read_layers())


def test_layers_form_no_cycle():
    allowed, done = read_layers(), set()
    while len(done) < len(allowed):
        ready = {layer for layer, names in allowed.items() if layer not in done and names <= done}
        assert ready, "layers.txt has a cycle among " + ", ".join(sorted(set(allowed) - done))
        done |= ready


def test_includes_keep_the_layers():
    assert broken_includes(ROOT, read_layers()) == []


def test_a_broken_layer_is_seen(tmp_path):
    os.makedirs(tmp_path / "src/base")
    (tmp_path / "src/base/slip.c").write_text('#include "run/plan.h"\n')
    assert broken_includes(str(tmp_path), read_layers()) == ["src/base/slip.c includes run"]


def undefined_symbols(path):
    listing = subprocess.run(["nm", "-u", path], capture_output=True, text=True, check=True).stdout
    return {re.sub(r"@.*", "", word) for word in re.findall(r"U (\S+)", listing)}


OPENING = {"open", "open64", "openat", "openat64", "fopen", "fopen64", "creat", "unlink", "unlinkat", "rename", "renameat",
           "mkdir", "mkdirat", "opendir", "fdopendir", "stat", "fstatat"}
ENDING = {"exit", "_exit", "abort", "printf", "puts", "putchar", "fprintf", "__printf_chk", "__fprintf_chk", "perror",
          "stdout", "stderr", "quick_exit"}


def offenders(symbols, layer):
    found = []
    for path in sorted(glob.glob(os.path.join(OBJECTS, "*/*.o"))):
        if os.path.basename(os.path.dirname(path)) != layer:
            used = undefined_symbols(path) & symbols
            found += [f"{os.path.relpath(path, OBJECTS)} uses {name}" for name in sorted(used)]
    return found


def test_only_io_opens_files():
    assert glob.glob(os.path.join(OBJECTS, "io/*.o")), "build the release first"
    assert offenders(OPENING, "io") == []
    assert any(undefined_symbols(p) & OPENING for p in glob.glob(os.path.join(OBJECTS, "io/*.o")))


def test_only_cli_prints_and_exits():
    assert offenders(ENDING, "cli") == []


@pytest.mark.parametrize("path", sorted(glob.glob(os.path.join(ROOT, "src/*/*.[ch]")) + [os.path.join(ROOT, "include/underfoot.h")]))
def test_every_source_file_names_its_licence(path):
    assert open(path).readline().strip() == "/* SPDX-License-Identifier: GPL-3.0-or-later */"


def test_pages_made_from_the_tables_are_current():
    program = os.path.join(ROOT, "build/release/underfoot")
    for page in ("settings", "columns", "sheet-columns"):
        made = subprocess.run([program, "docs", page], capture_output=True, text=True, check=True).stdout
        assert open(os.path.join(ROOT, f"docs/{page}.md")).read() == made, f"run make docs: {page}.md is old"


def test_top_level_holds_only_what_the_layout_names():
    names = set(subprocess.run(["git", "-C", ROOT, "ls-files"], capture_output=True, text=True, check=True).stdout.split("\n"))
    tops = {name.split("/")[0] for name in names if name and not name.startswith(".")}
    assert tops <= {"README.md", "DEVELOPERS.md", "Makefile", "src", "include", "tests", "fixtures", "batch", "docs"}
