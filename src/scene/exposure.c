/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "scene/exposure.h"

#include <math.h>

void uf_scene_illuminate(uf_plane flat, double fall, double right, double down)
{
    double middle_x = (flat.width - 1) / 2.0, middle_y = (flat.height - 1) / 2.0;
    double corner2 = middle_x * middle_x + middle_y * middle_y;
    double cx = middle_x + right * flat.width, cy = middle_y + down * flat.height;
    double slope = corner2 > 0 ? fall / corner2 : 0;
    double sum = 0;
    for (int y = 0; y < flat.height; y++) {
        float *row = uf_plane_row(flat, y);
        for (int x = 0; x < flat.width; x++) {
            row[x] = (float)(1 - slope * ((x - cx) * (x - cx) + (y - cy) * (y - cy)));
            sum += row[x];
        }
    }
    double mean = sum / ((double)flat.width * flat.height);
    for (int y = 0; y < flat.height; y++) {
        float *row = uf_plane_row(flat, y);
        for (int x = 0; x < flat.width; x++)
            row[x] = (float)(row[x] / mean);
    }
}

static double whole_counts(double adu)
{
    adu = floor(adu + 0.5);
    return adu < 0 ? 0 : adu > 65535 ? 65535 : adu;
}

void uf_scene_expose(uf_plane light_adu, const uf_scene_camera *camera, uf_random *random)
{
    double gain = camera->gain_e_per_adu;
    for (int y = 0; y < light_adu.height; y++) {
        float *row = uf_plane_row(light_adu, y);
        for (int x = 0; x < light_adu.width; x++) {
            double electrons = uf_random_poisson(random, row[x] * gain);
            electrons += camera->read_noise_e * uf_random_normal(random);
            row[x] = (float)whole_counts(camera->offset_adu + electrons / gain);
        }
    }
}
