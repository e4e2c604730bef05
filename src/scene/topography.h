/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The gap under every cell of a scene: a rolling membrane, broad contact patches, focal spots. */
#ifndef UF_SCENE_TOPOGRAPHY_H
#define UF_SCENE_TOPOGRAPHY_H

#include "scene/scene.h"

/* Fills scene->gap_nm (NaN outside cells) and the list of spots, from scene->labels. UF_MEMORY. */
UF_MUST_USE uf_status uf_scene_topography(uf_work *work, const uf_scene_settings *settings, uf_scene *scene,
                                          uf_error *error);

#endif
