/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibrate_camera.h"

#include <math.h>
#include <stdio.h>
#include <string.h>

#include "io/image_encode.h"
#include "io/output.h"
#include "run/calibrate_camera_parts.h"
#include "run/frames.h"

static uf_status check_request(const uf_camera_request *r, uf_error *error)
{
    if (r->common.image_count)
        return uf_fail(
            error, UF_USAGE,
            "'%.200s' belongs to neither --dark nor --flat: underfoot calibrate camera --channel near --dark "
            "IMAGE... --flat IMAGE... -o FILE.ini",
            r->common.images[0]);
    if (r->frames.dark_count < 1 || r->frames.flat_count < 1)
        return uf_fail(error, UF_USAGE,
                       "calibrate camera needs dark frames and pairs of flats: --dark dark_*.tif --flat light_*.tif");
    return UF_OK;
}

/* ---- one set of frames ------------------------------------------------------------------------- */

/* What one set tells; the arena holds what it points to. */
typedef struct frame_set {
    const uf_camera_frames *frames;
    uf_dark_frames *dark_frames;
    uf_dark *dark;
    uf_response *response; /* NULL: not wanted */
    uf_photon_point *points;
    uf_point_fit *fits;
    int point_count;
    uf_photon_transfer transfer;
} frame_set;

static uf_status add_darks(uf_reader *reader, frame_set *set, uf_error *error)
{
    uf_frame_list list = {set->frames->darks, set->frames->dark_count, "dark frame"};
    uf_frame_place place = {0};
    uf_plane frame;
    int found;
    uf_status status = uf_next_frame(reader, &list, &place, &frame, &found, error);
    int width = frame.width, height = frame.height;
    /* The first frame only told the size: what is to stay is taken before it is read again. */
    if (status == UF_OK)
        status = uf_dark_start(reader->work, width, height, set->dark_frames, error);
    place = (uf_frame_place){0};
    while (status == UF_OK) {
        uf_arena_mark mark = uf_arena_now(&reader->work->arena);
        status = uf_next_frame(reader, &list, &place, &frame, &found, error);
        if (status == UF_OK && found) {
            status = uf_dark_add(reader->work, set->dark_frames, frame, error);
            if (status != UF_OK)
                uf_fail_in(error, status, place.name);
        }
        uf_arena_back(&reader->work->arena, mark);
        if (!found)
            break;
    }
    return status == UF_OK ? uf_dark_finish(reader->work, set->dark_frames, set->dark, error) : status;
}

static uf_status add_pair(uf_reader *reader, const uf_frame_list *list, uf_frame_place *place, frame_set *set,
                          double full_scale_adu, int *found, uf_error *error)
{
    uf_plane first, second;
    char name[512];
    uf_status status = uf_next_frame(reader, list, place, &first, found, error);
    if (status != UF_OK || !*found)
        return status;
    int number = set->point_count;
    const uf_reals *exposures = &set->frames->exposures_ms;
    memcpy(name, place->name, sizeof name);
    if (number == UF_REALS_LIMIT)
        return uf_fail(error, UF_INPUT, "more than %d pairs of flats; leave some out", UF_REALS_LIMIT);
    status = uf_next_frame(reader, list, place, &second, found, error);
    if (status == UF_OK && !*found)
        return uf_fail(
            error, UF_INPUT,
            "%s: has no second frame; flats come in pairs of one exposure, in order: first, second, first, second",
            name);
    if (status != UF_OK)
        return status;
    status = uf_photon_pair(reader->work, set->dark, first, second,
                            number < exposures->count ? exposures->values[number] : (double)NAN, full_scale_adu,
                            set->response, &set->points[number], error);
    if (status != UF_OK)
        uf_fail_in(error, status, name);
    set->point_count++;
    return status;
}

static uf_status add_pairs(uf_reader *reader, frame_set *set, double full_scale_adu, uf_error *error)
{
    uf_frame_list list = {set->frames->flats, set->frames->flat_count, "flat"};
    uf_frame_place place = {0};
    int found = 1;
    uf_status status = UF_OK;
    while (status == UF_OK && found) {
        uf_arena_mark mark = uf_arena_now(&reader->work->arena);
        status = add_pair(reader, &list, &place, set, full_scale_adu, &found, error);
        uf_arena_back(&reader->work->arena, mark);
    }
    int exposures = set->frames->exposures_ms.count;
    if (status == UF_OK && exposures && exposures != set->point_count)
        return uf_fail(error, UF_INPUT,
                       "%d exposures are given for %d pairs of flats; expected one a pair, in their order", exposures,
                       set->point_count);
    return status;
}

static uf_status measure_set(uf_reader *reader, frame_set *set, double full_scale_adu, double excess, uf_error *error)
{
    uf_status status = add_darks(reader, set, error);
    if (status == UF_OK && set->response)
        status =
            uf_response_start(reader->work, set->dark_frames->width, set->dark_frames->height, set->response, error);
    if (status == UF_OK)
        status = add_pairs(reader, set, full_scale_adu, error);
    if (status != UF_OK)
        return status;
    return uf_photon_transfer_fit(set->dark, set->points, set->point_count, excess, &set->transfer, set->fits, error);
}

/* ---- all that is found ------------------------------------------------------------------------- */

static uf_status find_excess(uf_reader *reader, uf_camera_findings *f, uf_error *error)
{
    uf_dark_frames dark_frames = {0};
    uf_dark dark;
    uf_photon_point points[UF_REALS_LIMIT];
    uf_point_fit fits[UF_REALS_LIMIT];
    frame_set set = {
        .frames = &f->request->plain, .dark_frames = &dark_frames, .dark = &dark, .points = points, .fits = fits};
    if (!f->request->plain.flat_count)
        return UF_OK;
    double full_scale = f->request->common.settings->camera[f->request->channel].full_scale_adu;
    uf_status status = measure_set(reader, &set, full_scale, 1, error);
    if (status != UF_OK) {
        uf_fail_in(error, status, "without multiplication");
        return status;
    }
    status = uf_excess_noise(&f->transfer, &set.transfer, &f->excess, error);
    if (status == UF_OK) {
        uf_photon_transfer_set_excess(&f->transfer, &f->dark, f->excess.noise, f->excess.noise_sd);
        f->has_excess = 1;
    }
    return status;
}

static uf_status find_all(uf_reader *reader, uf_camera_findings *f, uf_error *error)
{
    const uf_camera_request *r = f->request;
    double full_scale = r->common.settings->camera[r->channel].full_scale_adu;
    frame_set set = {.frames = &r->frames,
                     .dark_frames = &f->dark_frames,
                     .dark = &f->dark,
                     .response = &f->response,
                     .points = f->points,
                     .fits = f->fits};
    uf_status status = check_request(r, error);
    if (status == UF_OK)
        status = measure_set(reader, &set, full_scale, r->excess_noise, error);
    if (status != UF_OK)
        return status;
    f->transfer = set.transfer;
    f->point_count = set.point_count;
    f->keeps_dark = f->dark.pattern_adu > f->dark.noise_adu / sqrt(f->dark_frames.count);
    status = find_excess(reader, f, error);
    if (status == UF_OK)
        status = uf_plane_take(reader->work, f->dark_frames.width, f->dark_frames.height, &f->defects, error);
    if (status == UF_OK)
        status = uf_camera_defects(reader->work, &f->dark, &f->response, f->defects, &f->counts, error);
    return status;
}

/* ---- results ------------------------------------------------------------------------------------- */

/* An image beside the fragment, and the line that names it. */
static uf_status write_image(const uf_camera_findings *f, uf_plane plane, const char *ending, const char *section,
                             const char *key, uf_fragment *fragment, uf_error *error)
{
    uf_text path = {0}, bytes = {0};
    uf_fragment_beside(&path, f->request->common.out_path, ending);
    uf_status status = uf_text_check(&path, "file names", error);
    if (status == UF_OK)
        status = strcmp(key, "dark") == 0
                     ? uf_encode_float_tiff(&bytes, plane, (double)NAN, "mean of dark frames", error)
                     : uf_encode_count_tiff(&bytes, plane, (double)NAN, "defects", error);
    if (status == UF_OK)
        status = uf_output_file(path.bytes, bytes.bytes, bytes.length, error);
    if (status == UF_OK)
        uf_fragment_word(fragment, section, key, uf_base_name(path.bytes));
    uf_text_free(&path);
    uf_text_free(&bytes);
    return status;
}

static uf_status write_dark(const uf_camera_findings *f, uf_reader *reader, const char *section,
                            uf_fragment *fragment, uf_error *error)
{
    uf_plane mean;
    uf_status status = uf_plane_take(reader->work, f->dark_frames.width, f->dark_frames.height, &mean, error);
    if (status != UF_OK)
        return status;
    uf_dark_image(&f->dark_frames, mean);
    return write_image(f, mean, "_dark.tif", section, "dark", fragment, error);
}

static uf_status write_fragment(const uf_camera_findings *f, uf_reader *reader, uf_error *error)
{
    static const char *const sections[] = {"near.camera", "wide.camera"};
    const char *section = sections[f->request->channel];
    const uf_photon_transfer *t = &f->transfer;
    uf_fragment fragment;
    uf_status status = UF_OK;
    uf_fragment_start(&fragment, "camera", reader);
    uf_fragment_number(&fragment, section, "offset_adu", t->offset_adu, 7);
    uf_fragment_number(&fragment, section, "gain_e_per_adu", t->gain_e_per_adu, 5);
    uf_fragment_number(&fragment, section, "read_noise_e", t->read_noise_e, 4);
    if (t->full_scale_from != UF_FULL_SCALE_UNSEEN)
        uf_fragment_number(&fragment, section, "full_scale_adu", t->full_scale_adu, 7);
    uf_fragment_number(&fragment, section, "excess_noise", fmin(fmax(t->excess_noise, 1), 4), 5);
    if (f->keeps_dark)
        status = write_dark(f, reader, section, &fragment, error);
    if (status == UF_OK && f->counts.any)
        status = write_image(f, f->defects, "_defects.tif", section, "defects", &fragment, error);
    if (status == UF_OK)
        status = uf_fragment_write(&fragment, f->request->common.out_path, error);
    uf_fragment_free(&fragment);
    return status;
}

static uf_status write_all(const uf_camera_findings *f, uf_reader *reader, uf_text *out, uf_error *error)
{
    const uf_calibration_request *r = &f->request->common;
    uf_status status = r->plot_path ? uf_camera_plot(f, r->plot_path, error) : UF_OK;
    if (status == UF_OK)
        status = write_fragment(f, reader, error);
    if (status == UF_OK && r->as_json)
        status = uf_camera_json(out, f, error);
    else if (status == UF_OK)
        uf_camera_words(out, f);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}

uf_status uf_calibrate_camera(const uf_camera_request *request, uf_text *out, uf_error *error)
{
    uf_work work = {0};
    uf_reader reader = {.work = &work, .settings = request->common.settings};
    uf_camera_findings findings = {.request = request};
    uf_status status = uf_pool_new(&work.pool, request->common.threads, error);
    if (status == UF_OK)
        status = find_all(&reader, &findings, error);
    if (status == UF_OK)
        status = write_all(&findings, &reader, out, error);
    uf_reader_free(&reader);
    uf_pool_free(&work.pool);
    uf_arena_free(&work.arena);
    return status;
}
