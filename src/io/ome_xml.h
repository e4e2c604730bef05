/* SPDX-License-Identifier: GPL-3.0-or-later */
/* The OME-XML of an OME-TIFF's first page (Open Microscopy Environment, schema 2016-06), read by expat: what the file says
 * about its images, their planes and pages. */
#ifndef UF_IO_OME_XML_H
#define UF_IO_OME_XML_H

#include "base/text.h"

enum { UF_OME_CHANNELS = 32, UF_OME_NAME = 80 };

typedef struct uf_ome_image {
    char id[UF_OME_NAME], name[UF_OME_NAME], acquired[40];
    int size_x, size_y, size_c, size_z, size_t_;
    char order[8];                           /* "XYZCT": what comes after Y changes fastest */
    double pixel_size_x_um, pixel_size_y_um; /* NaN where not said */
    double time_step_s;                      /* TimeIncrement; NaN where not said */
    char channels[UF_OME_CHANNELS][UF_OME_NAME];
    int channel_count;
    int *pages;      /* of plane (z * size_c + c) * size_t_ + t, from 0; -1: in no page of this file */
    double *delta_s; /* DeltaT of time t, NaN where not said */
    char plate[UF_OME_NAME];
    int well_row, well_column; /* from 0, -1: the file knows no wells */
    int well_field;            /* number of the image in its well, from 1 */
} uf_ome_image;

/* Zeroed it is empty and may be freed. */
typedef struct uf_ome {
    uf_ome_image *images;
    int image_count;
    bool several_files; /* planes lie in other files too */
} uf_ome;

/* Whether a page's description is OME-XML. */
bool uf_ome_is(const char *description);

/* Takes the XML apart; `path` is for the errors. UF_INPUT: what is no XML, has a DOCTYPE, or sizes beyond reason. */
UF_MUST_USE uf_status uf_ome_parse(uf_ome *ome, const char *xml, size_t length, const char *path, uf_error *error);

/* How many planes (channels x layers x times) all images have. */
double uf_ome_planes(const uf_ome *ome);

/* Refuses an XML that promises more or fewer planes than the file has pages, with both counts. */
UF_MUST_USE uf_status uf_ome_check_pages(const uf_ome *ome, int pages, const char *path, uf_error *error);

static inline int uf_ome_page(const uf_ome_image *image, int c, int z, int t)
{
    return image->pages[((size_t)z * (size_t)image->size_c + (size_t)c) * (size_t)image->size_t_ + (size_t)t];
}

/* The image that has a plane in the page (from 0), NULL when none has. */
const uf_ome_image *uf_ome_image_of(const uf_ome *ome, int page);

void uf_ome_free(uf_ome *ome);

#endif
