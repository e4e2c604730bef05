/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Where the cells of a scene lie. */
#ifndef UF_SCENE_CELL_LAYOUT_H
#define UF_SCENE_CELL_LAYOUT_H

#include "scene/scene.h"

/*
 * Fills `labels` with cells 1 .. count, each one 4-connected piece, none over another. Largest first, each is
 * tried at random places until it keeps clear of the others by a micrometre; with chance `touching` it is
 * instead pushed against an earlier cell until they share a border, and with chance `border` it is laid
 * across an edge of the image. Cells that find no room are left out. UF_MEMORY.
 */
UF_MUST_USE uf_status uf_scene_lay_cells(uf_work *work, const uf_scene_settings *settings, uf_labels *labels,
                                         uf_error *error);

#endif
