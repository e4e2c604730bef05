/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Elements come as a stream. Those that matter are few and their nesting is fixed by the schema, so that it is enough to
 * know the image in hand. Wells name their images by ID, mostly before the images come; they are matched at the end.
 */
#include "io/ome_xml.h"

#include <expat.h>
#include <limits.h>
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

enum { MOST_IMAGES = 20000, MOST_PLANES = 4000000, MOST_DEPTH = 64, MOST_BYTES = 64 << 20 };

typedef struct well_sample {
    char image[UF_OME_NAME], plate[UF_OME_NAME];
    int row, column, field;
} well_sample;

typedef struct ome_job {
    uf_ome *ome;
    XML_Parser parser;
    const char *path;
    uf_error *error;
    uf_status status;
    int depth;
    double planes, steps;           /* planes of all images; planes that TiffData placed */
    int next_page;                  /* after the last TiffData */
    int data_count;                 /* TiffData elements of the image in hand */
    int ifd, count, c, z, t;        /* of the TiffData in hand; count -1: all */
    bool elsewhere;                 /* its UUID names another file */
    bool in_date, in_uuid, in_data; /* what the text belongs to */
    char plate[UF_OME_NAME];
    int row, column, sample; /* of the well in hand */
    uf_text samples;         /* of well_sample */
    int image_capacity;
} ome_job;

/* ---- small things ---------------------------------------------------------------------------- */

static void stop(ome_job *job, const char *what)
{
    if (job->status == UF_OK)
        job->status = uf_fail(job->error, UF_INPUT, "%.400s: its OME-XML %s; export the file again as OME-TIFF",
                              job->path, what);
    (void)XML_StopParser(job->parser, XML_FALSE);
}

static void stop_memory(ome_job *job)
{
    job->status = uf_fail_memory(job->error, job->path);
    (void)XML_StopParser(job->parser, XML_FALSE);
}

static const char *plain_name(const char *name)
{
    const char *colon = strrchr(name, ':');
    return colon ? colon + 1 : name;
}

static const char *attribute(const char **attributes, const char *name)
{
    for (; *attributes; attributes += 2)
        if (strcmp(plain_name(attributes[0]), name) == 0)
            return attributes[1];
    return NULL;
}

/* A whole number from 0, `otherwise` when the attribute is missing, -1 when it is none. */
static int whole(const char **attributes, const char *name, int otherwise)
{
    const char *text = attribute(attributes, name);
    double value;
    if (!text)
        return otherwise;
    return uf_parse_number(text, &value) && value >= 0 && value <= INT_MAX / 2 && value == floor(value) ? (int)value
                                                                                                        : -1;
}

static double real(const char **attributes, const char *name)
{
    const char *text = attribute(attributes, name);
    double value;
    return text && uf_parse_number(text, &value) ? value : (double)NAN;
}

static void copy_name(char *to, size_t size, const char *from)
{
    (void)snprintf(to, size, "%s", from ? from : "");
}

static uf_ome_image *image_now(const ome_job *job)
{
    return job->ome->image_count ? &job->ome->images[job->ome->image_count - 1] : NULL;
}

static bool has_planes(const uf_ome_image *image)
{
    return image && image->pages;
}

/* ---- images ---------------------------------------------------------------------------------- */

static void begin_image(ome_job *job, const char **attributes)
{
    uf_ome *ome = job->ome;
    if (ome->image_count == MOST_IMAGES) {
        stop(job, "lists more than 20000 images");
        return;
    }
    if (ome->image_count == job->image_capacity) {
        int capacity = job->image_capacity ? 2 * job->image_capacity : 4;
        uf_ome_image *images = realloc(ome->images, (size_t)capacity * sizeof *images);
        if (!images) {
            stop_memory(job);
            return;
        }
        ome->images = images;
        job->image_capacity = capacity;
    }
    uf_ome_image *image = &ome->images[ome->image_count++];
    *image = (uf_ome_image){.well_row = -1,
                            .well_column = -1,
                            .pixel_size_x_um = (double)NAN,
                            .pixel_size_y_um = (double)NAN,
                            .time_step_s = (double)NAN};
    copy_name(image->id, sizeof image->id, attribute(attributes, "ID"));
    copy_name(image->name, sizeof image->name, attribute(attributes, "Name"));
}

/* Micrometres in the unit of a PhysicalSize; NaN for one that is no length ("pixel", "reference frame"). */
static double unit_um(const char *unit)
{
    static const struct {
        const char *name;
        double um;
    } units[] = {{"\xC2\xB5m", 1}, {"\xCE\xBCm", 1}, {"um", 1},  {"nm", 1e-3},
                 {"mm", 1e3},      {"cm", 1e4},      {"m", 1e6}, {"pm", 1e-6}};
    for (size_t k = 0; unit && k < sizeof units / sizeof units[0]; k++)
        if (strcmp(unit, units[k].name) == 0)
            return units[k].um;
    return unit ? (double)NAN : 1;
}

static double size_um(const char **attributes, const char *name, const char *unit_name)
{
    double size = real(attributes, name) * unit_um(attribute(attributes, unit_name));
    return size > 0 ? uf_round_digits(size, 12) : (double)NAN;
}

static double seconds_in(const char *unit)
{
    return !unit || strcmp(unit, "s") == 0 ? 1
           : strcmp(unit, "ms") == 0       ? 1e-3
           : strcmp(unit, "min") == 0      ? 60
           : strcmp(unit, "h") == 0        ? 3600
                                           : (double)NAN;
}

static bool good_order(const char *order)
{
    return strlen(order) == 5 && strncmp(order, "XY", 2) == 0 && strchr(order, 'Z') && strchr(order, 'C') &&
           strchr(order, 'T');
}

static void begin_pixels(ome_job *job, const char **attributes)
{
    uf_ome_image *i = image_now(job);
    const char *order = attribute(attributes, "DimensionOrder");
    if (!i || i->pages)
        return;
    i->size_x = whole(attributes, "SizeX", -1);
    i->size_y = whole(attributes, "SizeY", -1);
    i->size_c = whole(attributes, "SizeC", 1);
    i->size_z = whole(attributes, "SizeZ", 1);
    i->size_t_ = whole(attributes, "SizeT", 1);
    double planes = (double)i->size_c * i->size_z * i->size_t_;
    if (i->size_c < 1 || i->size_z < 1 || i->size_t_ < 1 || i->size_c > MOST_PLANES || planes > MOST_PLANES ||
        (job->planes += planes) > MOST_PLANES) {
        stop(job, "has sizes of channels, layers or times that make no sense");
        return;
    }
    copy_name(i->order, sizeof i->order, order && good_order(order) ? order : "XYCZT");
    i->pixel_size_x_um = size_um(attributes, "PhysicalSizeX", "PhysicalSizeXUnit");
    i->pixel_size_y_um = size_um(attributes, "PhysicalSizeY", "PhysicalSizeYUnit");
    i->time_step_s = real(attributes, "TimeIncrement") * seconds_in(attribute(attributes, "TimeIncrementUnit"));
    i->pages = malloc((size_t)planes * sizeof *i->pages);
    i->delta_s = malloc((size_t)i->size_t_ * sizeof *i->delta_s);
    if (!i->pages || !i->delta_s) {
        stop_memory(job);
        return;
    }
    for (size_t k = 0; k < (size_t)planes; k++)
        i->pages[k] = -1;
    for (int t = 0; t < i->size_t_; t++)
        i->delta_s[t] = (double)NAN;
    job->data_count = 0;
}

static void begin_channel(ome_job *job, const char **attributes)
{
    uf_ome_image *image = image_now(job);
    if (!image || image->channel_count == UF_OME_CHANNELS)
        return;
    int samples = whole(attributes, "SamplesPerPixel", 1);
    const char *name = attribute(attributes, "Name");
    if (samples != 1) {
        stop(job, "has a channel of more than one value a pixel, which is colour");
        return;
    }
    copy_name(image->channels[image->channel_count++], UF_OME_NAME, name ? name : attribute(attributes, "ID"));
}

/* ---- planes ---------------------------------------------------------------------------------- */

static void begin_data(ome_job *job, const char **attributes)
{
    bool placed = attribute(attributes, "IFD") != NULL;
    job->ifd = whole(attributes, "IFD", job->data_count || job->ome->image_count > 1 ? job->next_page : 0);
    job->count = whole(attributes, "PlaneCount", placed ? 1 : INT_MAX);
    job->c = whole(attributes, "FirstC", 0);
    job->z = whole(attributes, "FirstZ", 0);
    job->t = whole(attributes, "FirstT", 0);
    job->elsewhere = false;
    job->in_data = true;
    if (job->ifd < 0 || job->count < 0 || job->c < 0 || job->z < 0 || job->t < 0)
        stop(job, "has a TiffData whose numbers are none");
}

/* Moves one plane on in the image's order; false after the last. */
static bool next_plane(const uf_ome_image *image, int *c, int *z, int *t)
{
    for (int k = 2; k < 5; k++) {
        int *index = image->order[k] == 'C' ? c : image->order[k] == 'Z' ? z : t;
        int size = image->order[k] == 'C' ? image->size_c : image->order[k] == 'Z' ? image->size_z : image->size_t_;
        if (++*index < size)
            return true;
        *index = 0;
    }
    return false;
}

static void end_data(ome_job *job)
{
    uf_ome_image *i = image_now(job);
    job->in_data = false;
    if (!has_planes(i) || job->elsewhere)
        return;
    int c = job->c, z = job->z, t = job->t, page = job->ifd;
    bool more = c < i->size_c && z < i->size_z && t < i->size_t_;
    for (int k = 0; more && k < job->count; k++, page++) {
        i->pages[((size_t)z * (size_t)i->size_c + (size_t)c) * (size_t)i->size_t_ + (size_t)t] = page;
        more = next_plane(i, &c, &z, &t);
    }
    if ((job->steps += page - job->ifd) > 2.0 * MOST_PLANES)
        stop(job, "places planes again and again");
    job->next_page = page;
    job->data_count++;
}

/* Without any TiffData the planes lie in order, after those of the images before. */
static void end_pixels(ome_job *job)
{
    static const char *none[] = {NULL};
    if (!has_planes(image_now(job)) || job->data_count || job->ome->several_files)
        return;
    begin_data(job, none);
    end_data(job);
}

static void begin_plane(ome_job *job, const char **attributes)
{
    uf_ome_image *image = image_now(job);
    int t = whole(attributes, "TheT", 0);
    if (!has_planes(image) || t < 0 || t >= image->size_t_ || !isnan(image->delta_s[t]))
        return;
    image->delta_s[t] = real(attributes, "DeltaT") * seconds_in(attribute(attributes, "DeltaTUnit"));
}

/* ---- wells ----------------------------------------------------------------------------------- */

static void begin_well(ome_job *job, const char **attributes)
{
    job->row = whole(attributes, "Row", -1);
    job->column = whole(attributes, "Column", -1);
    job->sample = 0;
}

static void take_sample(ome_job *job, const char **attributes)
{
    well_sample sample = {.row = job->row, .column = job->column, .field = job->sample};
    if (job->sample == 0)
        return; /* an ImageRef elsewhere than in a well */
    copy_name(sample.image, sizeof sample.image, attribute(attributes, "ID"));
    copy_name(sample.plate, sizeof sample.plate, job->plate);
    uf_text_bytes(&job->samples, &sample, sizeof sample);
}

static int by_image(const void *a, const void *b)
{
    return strcmp(((const well_sample *)a)->image, ((const well_sample *)b)->image);
}

static void place_images(ome_job *job)
{
    size_t count = job->samples.length / sizeof(well_sample);
    well_sample *list = count ? malloc(job->samples.length) : NULL;
    if (!list)
        return;
    memcpy(list, job->samples.bytes, job->samples.length);
    qsort(list, count, sizeof *list, by_image);
    for (int k = 0; k < job->ome->image_count; k++) {
        uf_ome_image *image = &job->ome->images[k];
        well_sample wanted = {.row = -1};
        memcpy(wanted.image, image->id, sizeof wanted.image);
        const well_sample *found = bsearch(&wanted, list, count, sizeof *list, by_image);
        if (!found)
            continue;
        image->well_row = found->row;
        image->well_column = found->column;
        image->well_field = found->field;
        memcpy(image->plate, found->plate, sizeof image->plate);
    }
    free(list);
}

/* ---- the stream ------------------------------------------------------------------------------ */

static void begin_uuid(ome_job *job, const char **attributes)
{
    const char *file = attribute(attributes, "FileName");
    if (!job->in_data || !file || strcmp(file, uf_base_name(job->path)) == 0)
        return;
    job->elsewhere = true;
    job->ome->several_files = true;
}

static void begin_element(void *context, const char *full_name, const char **attributes)
{
    ome_job *job = context;
    const char *name = plain_name(full_name);
    if (++job->depth > MOST_DEPTH) {
        stop(job, "is nested too deeply");
        return;
    }
    if (strcmp(name, "Image") == 0)
        begin_image(job, attributes);
    else if (strcmp(name, "Pixels") == 0)
        begin_pixels(job, attributes);
    else if (strcmp(name, "Channel") == 0)
        begin_channel(job, attributes);
    else if (strcmp(name, "TiffData") == 0)
        begin_data(job, attributes);
    else if (strcmp(name, "UUID") == 0)
        begin_uuid(job, attributes);
    else if (strcmp(name, "Plane") == 0)
        begin_plane(job, attributes);
    else if (strcmp(name, "Plate") == 0)
        copy_name(job->plate, sizeof job->plate, attribute(attributes, "Name"));
    else if (strcmp(name, "Well") == 0)
        begin_well(job, attributes);
    else if (strcmp(name, "WellSample") == 0)
        job->sample++;
    else if (strcmp(name, "ImageRef") == 0)
        take_sample(job, attributes);
    job->in_date = strcmp(name, "AcquisitionDate") == 0;
}

static void end_element(void *context, const char *full_name)
{
    ome_job *job = context;
    const char *name = plain_name(full_name);
    job->depth--;
    job->in_date = false;
    if (strcmp(name, "TiffData") == 0)
        end_data(job);
    else if (strcmp(name, "Pixels") == 0)
        end_pixels(job);
    else if (strcmp(name, "Well") == 0)
        job->sample = 0;
}

static void take_letters(void *context, const char *text, int length)
{
    ome_job *job = context;
    uf_ome_image *image = image_now(job);
    if (!job->in_date || !image)
        return;
    size_t used = strlen(image->acquired);
    for (int k = 0; k < length && used + 1 < sizeof image->acquired; k++)
        if (text[k] > ' ')
            image->acquired[used++] = text[k];
    image->acquired[used] = '\0';
}

/* No OME-XML has a document type; where there is one, entities may follow that grow without end. */
static void meet_doctype(void *context, const char *name, const char *system, const char *public_name, int internal)
{
    (void)name;
    (void)system;
    (void)public_name;
    (void)internal;
    stop(context, "has a DOCTYPE, which OME-XML never has");
}

bool uf_ome_is(const char *description)
{
    const char *start = description ? strstr(description, "<OME") : NULL;
    start = start || !description ? start : strstr(description, ":OME ");
    return start && start - description < 4096;
}

static void parse(ome_job *job, const char *xml, size_t length)
{
    XML_SetUserData(job->parser, job);
    XML_SetElementHandler(job->parser, begin_element, end_element);
    XML_SetCharacterDataHandler(job->parser, take_letters);
    XML_SetStartDoctypeDeclHandler(job->parser, meet_doctype);
    if (XML_Parse(job->parser, xml, (int)length, XML_TRUE) != XML_STATUS_OK && job->status == UF_OK)
        job->status = uf_fail(
            job->error, UF_INPUT, "%.400s: its OME-XML is broken at line %lu (%s); export the file again", job->path,
            (unsigned long)XML_GetCurrentLineNumber(job->parser), XML_ErrorString(XML_GetErrorCode(job->parser)));
}

uf_status uf_ome_parse(uf_ome *ome, const char *xml, size_t length, const char *path, uf_error *error)
{
    ome_job job = {.ome = ome, .path = path, .error = error};
    *ome = (uf_ome){0};
    if (length > MOST_BYTES)
        return uf_fail(error, UF_INPUT, "%.400s: its OME-XML has more than 64 MB", path);
    job.parser = XML_ParserCreate(NULL);
    if (!job.parser)
        return uf_fail_memory(error, path);
    parse(&job, xml, length);
    XML_ParserFree(job.parser);
    if (job.status == UF_OK)
        place_images(&job);
    for (int k = 0; job.status == UF_OK && k < ome->image_count; k++)
        if (!ome->images[k].pages)
            job.status = uf_fail(error, UF_INPUT,
                                 "%.400s: image %d of its OME-XML has no Pixels; export the file again", path, k + 1);
    uf_text_free(&job.samples);
    if (job.status != UF_OK)
        uf_ome_free(ome);
    return job.status;
}

double uf_ome_planes(const uf_ome *ome)
{
    double planes = 0;
    for (int k = 0; k < ome->image_count; k++)
        planes += (double)ome->images[k].size_c * ome->images[k].size_z * ome->images[k].size_t_;
    return planes;
}

static bool pages_hold(const uf_ome_image *image, int pages)
{
    size_t planes = (size_t)image->size_c * (size_t)image->size_z * (size_t)image->size_t_;
    for (size_t k = 0; k < planes; k++)
        if (image->pages[k] < 0 || image->pages[k] >= pages)
            return false;
    return true;
}

uf_status uf_ome_check_pages(const uf_ome *ome, int pages, const char *path, uf_error *error)
{
    if (ome->several_files)
        return uf_fail(error, UF_INPUT,
                       "%.400s: its OME-XML spreads the planes over several files; name channels by {channel} in the "
                       "files' names, or export one file a field",
                       path);
    double planes = uf_ome_planes(ome);
    const uf_ome_image *first = ome->image_count ? &ome->images[0] : NULL;
    bool hold = true;
    for (int k = 0; k < ome->image_count; k++)
        hold = hold && pages_hold(&ome->images[k], pages);
    if (planes == (double)pages && hold)
        return UF_OK;
    if (!first)
        return uf_fail(error, UF_INPUT, "%.400s: its OME-XML lists no image, the file has %d pages; export it again",
                       path, pages);
    return uf_fail(
        error, UF_INPUT,
        "%.400s: its OME-XML promises %.0f planes (%d image%s, the first with %d channels x %d layers x %d "
        "times), the file has %d page%s; %sexport it again",
        path, planes, ome->image_count, ome->image_count == 1 ? "" : "s", first->size_c, first->size_z,
        first->size_t_, pages, pages == 1 ? "" : "s",
        planes == (double)pages ? "some planes are in no page: " : "it was cut short or edited: ");
}

const uf_ome_image *uf_ome_image_of(const uf_ome *ome, int page)
{
    for (int k = 0; k < ome->image_count; k++) {
        const uf_ome_image *image = &ome->images[k];
        size_t planes = (size_t)image->size_c * (size_t)image->size_z * (size_t)image->size_t_;
        for (size_t i = 0; i < planes; i++)
            if (image->pages[i] == page)
                return image;
    }
    return NULL;
}

void uf_ome_free(uf_ome *ome)
{
    for (int k = 0; k < ome->image_count; k++) {
        free(ome->images[k].pages);
        free(ome->images[k].delta_s);
    }
    free(ome->images);
    *ome = (uf_ome){0};
}
