/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Each part of a scene draws from its own stream of random numbers, so that another camera, say, leaves the cells
 * where they are. */
#ifndef UF_SCENE_RANDOM_H
#define UF_SCENE_RANDOM_H

#include "base/random.h"

/* One part of a scene each. Renumbering them changes every scene. */
typedef enum uf_scene_stream {
    UF_STREAM_LAYOUT = 1,
    UF_STREAM_TRAITS,
    UF_STREAM_MEMBRANE,
    UF_STREAM_PATCHES,
    UF_STREAM_SPOTS,
    UF_STREAM_DYE,
    UF_STREAM_NEAR_CAMERA,
    UF_STREAM_WIDE_CAMERA,
    UF_STREAM_DUST,
    UF_STREAM_BEADS
} uf_scene_stream;

#endif
