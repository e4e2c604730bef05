/* SPDX-License-Identifier: GPL-3.0-or-later */
/* How deep inside its cell a pixel lies. The scene keeps its own measure: where patches and spots are put must
 * not depend on the code that is to find them. */
#ifndef UF_SCENE_EDGE_DISTANCE_H
#define UF_SCENE_EDGE_DISTANCE_H

#include "image/plane.h"

/* Distance of each cell pixel from its own cell's outline in um, 0 outside cells. The image's edge is no
 * outline: a cell that covers the whole image is width + height deep everywhere, a finite number. Chamfer
 * distance with the best two steps of a 3 x 3 neighbourhood, right to 4.5 % (Borgefors 1986, Comput. Vision
 * Graph. Image Process. 34:344). */
void uf_scene_edge_distance(uf_labels labels, double pixel_size_um, uf_plane distance_um);

#endif
