/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * All fields of a well on one page: thumbnails (report/thumbnail.h) with the field's name, its number of cells and its flags
 * under each. All are brought to one white, so that a field that looks dim beside another is dim.
 */
#ifndef UF_REPORT_CONTACT_SHEET_H
#define UF_REPORT_CONTACT_SHEET_H

#include "base/work.h"
#include "image/indexed.h"

typedef struct uf_contact_tile {
    uf_indexed thumbnail; /* data NULL: there is none */
    double white_adu;     /* of the thumbnail */
    const char *name;
    const char *numbers; /* "12 cells" */
    const char *flags;   /* words, may be empty: then the frame is thin */
    const char *why;     /* in place of a thumbnail that is not there */
} uf_contact_tile;

enum { UF_CONTACT_TILES = 100 }; /* at most on one page */

typedef struct uf_contact_sheet {
    const char *title, *note; /* above and below */
    const uf_contact_tile *tiles;
    int count;
    double white_adu; /* of all; NaN: each its own */
} uf_contact_sheet;

/* Where tiles are: the first one's thumbnail at (x, y), the next `step_x` to the right or `step_y` down. */
typedef struct uf_contact_layout {
    int x, y, step_x, step_y, columns;
} uf_contact_layout;

/* Draws the page; the picture's pixels lie in `work`'s arena. `layout` may be NULL. UF_MEMORY. */
UF_MUST_USE uf_status uf_contact_sheet_draw(uf_work *work, const uf_contact_sheet *sheet, uf_indexed *picture,
                                            uf_contact_layout *layout, uf_error *error);

#endif
