#!/usr/bin/python3
# SPDX-License-Identifier: GPL-3.0-or-later
"""Writes src/report/font_data.c: DejaVu Sans as small grey bitmaps, so that no font file is needed at run time.

Run by hand when the set of characters or a size changes, from the root of the repository:

    tests/tools/make_font.py > src/report/font_data.c

Needs the Debian packages python3-pil and fonts-dejavu-core. The font's licence is docs/LICENSE-font.
"""
from PIL import Image, ImageFont

REGULAR = "/usr/share/fonts/truetype/dejavu/DejaVuSans.ttf"
FACES = [("small", 12), ("large", 16)]
# After ASCII: degree, plus-minus, superscript two, micro, multiplication, en dash, ellipsis, minus, at most, at least.
EXTRA = "\u00b0\u00b1\u00b2\u00b5\u00d7\u2013\u2026\u2212\u2264\u2265"
LEVELS = 7  # grey levels above nothing


def bitmap(font, character):
    """Advance, left, top (rows above the baseline) and rows of levels, cut to the ink."""
    canvas = Image.new("L", (64, 64))
    mask, offset = font.getmask2(character, mode="L", anchor="ls")
    if mask.size[0] and mask.size[1]:
        glyph = Image.frombytes("L", mask.size, bytes(mask))
        canvas.paste(glyph, (16 + offset[0], 40 + offset[1]))
    canvas = canvas.point(lambda v: (v * LEVELS + 127) // 255)
    box = canvas.getbbox() or (16, 40, 16, 40)
    rows = [[canvas.getpixel((x, y)) for x in range(box[0], box[2])] for y in range(box[1], box[3])]
    return round(font.getlength(character)), box[0] - 16, 40 - box[1], rows


def missing_box(size):
    """What stands for a character the font does not have."""
    width, height = size * 6 // 12, size * 9 // 12
    edge = [LEVELS] * width
    middle = [LEVELS] + [0] * (width - 2) + [LEVELS]
    return width + 2, 1, height, [edge] + [middle] * (height - 2) + [edge]


def write_face(name, size):
    font = ImageFont.truetype(REGULAR, size, layout_engine=ImageFont.Layout.BASIC)
    ascent, descent = font.getmetrics()
    glyphs = [(0, missing_box(size))]
    glyphs += [(ord(c), bitmap(font, c)) for c in [chr(k) for k in range(32, 127)] + list(EXTRA)]
    pixels, table = [], []
    for code, (advance, left, top, rows) in glyphs:
        width = len(rows[0]) if rows else 0
        table.append(f"{{{code}, {len(pixels)}, {width}, {len(rows)}, {left}, {top}, {advance}}}")
        for row in rows:
            pixels += row
    pixels += [0] * (-len(pixels) % 8)
    words = ["0x" + "".join(f"{v:x}" for v in pixels[k:k + 8]) for k in range(0, len(pixels), 8)]
    cap = bitmap(font, "H")[2]
    print(f"static const uint32_t {name}_pixels[] = {{")
    for k in range(0, len(words), 8):
        print("    " + ", ".join(words[k:k + 8]) + ",")
    print("};\n")
    print(f"static const uf_glyph {name}_glyphs[] = {{")
    for k in range(0, len(table), 3):
        print("    " + ", ".join(table[k:k + 3]) + ",")
    print("};\n")
    return f"    {{{name}_glyphs, {len(table)}, {name}_pixels, {ascent}, {descent}, {cap}}},"


def main():
    print("/* SPDX-License-Identifier: GPL-3.0-or-later */")
    print("/* Made by tests/tools/make_font.py from DejaVu Sans (licence: docs/LICENSE-font); do not edit. */")
    print('#include "report/font.h"\n')
    print("/* clang-format off */")
    faces = [write_face(name, size) for name, size in FACES]
    print("const uf_font_face uf_font_faces[UF_FONT_SIZES] = {")
    print("\n".join(faces))
    print("};")


main()
