/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/calibrate_shift.h"

#include <math.h>
#include <stdlib.h>

#include "base/constants.h"
#include "calibrate/similarity.h"
#include "calibrate/structure.h"
#include "correct/shift.h"
#include "run/report_parts.h"

/* Places a field is cut into: enough to tell scale and rotation, large enough to hold cells each. */
enum { PLACES = 4, SMALL_PLACES = 3, LEAST_PLACE_PX = 96, MOST_SHIFTS = 2048 };

/* A plain shift is applied to whole fields; what it misses at the corners should stay below half a pixel. */
static const double most_departure_px = 0.5, most_spread_px = 0.2;

typedef struct shift_findings {
    const uf_calibration_request *request;
    uf_local_shift shifts[MOST_SHIFTS];
    int shift_count, pairs, trusted_pairs;
    double dx_sum, dy_sum, dx2_sum, dy2_sum, score_least; /* of whole fields */
    double reach_px;
    int has_similarity;
    uf_similarity similarity;
    double dx_px, dy_px, sd_px, spread_px;
} shift_findings;

/* ---- places -------------------------------------------------------------------------------------- */

static uf_channel view_of(const uf_channel *channel, uf_box box)
{
    uf_channel view = *channel;
    view.image.data = uf_plane_row(channel->image, box.y0) + box.x0;
    view.image.width = box.x1 - box.x0;
    view.image.height = box.y1 - box.y0;
    view.saturated = (uf_mask){0};
    return view;
}

/* One place: the wide view is moved by the field's whole-pixel shift first, so that little is left to search for. */
static uf_status look_at_place(uf_work *work, const uf_channel *near, const uf_channel *wide, uf_box box, int dx,
                               int dy, shift_findings *f, uf_error *error)
{
    uf_plane image = near->image;
    uf_box moved = {box.x0 + dx, box.y0 + dy, box.x1 + dx, box.y1 + dy};
    if (moved.x0 < 0 || moved.y0 < 0 || moved.x1 > image.width || moved.y1 > image.height ||
        f->shift_count == MOST_SHIFTS)
        return UF_OK;
    uf_channel near_view = view_of(near, box), wide_view = view_of(wide, moved);
    uf_shift_estimate found;
    double x, y;
    uf_status status = uf_shift_find(work, &near_view, &wide_view, &found, error);
    if (status == UF_OK && found.trusted)
        status = uf_structure_centre(work, near_view.image, &x, &y, error);
    if (status == UF_OK && found.trusted)
        f->shifts[f->shift_count++] =
            (uf_local_shift){box.x0 + x - (image.width - 1) / 2.0, box.y0 + y - (image.height - 1) / 2.0,
                             dx + found.dx_px, dy + found.dy_px, 0};
    return status;
}

static uf_status look_at_places(uf_work *work, const uf_channel *near, const uf_channel *wide,
                                const uf_shift_estimate *whole, shift_findings *f, uf_error *error)
{
    uf_plane image = near->image;
    int dx = (int)lround(whole->dx_px), dy = (int)lround(whole->dy_px);
    int shorter = image.width < image.height ? image.width : image.height;
    int places = shorter / PLACES >= 2 * LEAST_PLACE_PX ? PLACES : SMALL_PLACES;
    uf_status status = UF_OK;
    if (shorter / places < LEAST_PLACE_PX)
        return UF_OK;
    /* A margin of the shift itself keeps every place inside both images. */
    int left = dx < 0 ? -dx : 0, top = dy < 0 ? -dy : 0, width = (image.width - abs(dx)) / places,
        height = (image.height - abs(dy)) / places;
    for (int k = 0; status == UF_OK && k < places * places; k++) {
        int x = left + k % places * width, y = top + k / places * height;
        status = look_at_place(work, near, wide, (uf_box){x, y, x + width, y + height}, dx, dy, f, error);
    }
    return status;
}

/* ---- pairs --------------------------------------------------------------------------------------- */

static void add_whole(shift_findings *f, const uf_shift_estimate *whole)
{
    f->trusted_pairs++;
    f->dx_sum += whole->dx_px;
    f->dy_sum += whole->dy_px;
    f->dx2_sum += whole->dx_px * whole->dx_px;
    f->dy2_sum += whole->dy_px * whole->dy_px;
}

static uf_status read_pair(uf_reader *reader, const char *near_path, const char *wide_path, uf_channel *near,
                           uf_channel *wide, uf_error *error)
{
    double pixel_um;
    uf_status status = uf_read_channel(reader, UF_NEAR, near_path, 0, near, 1, &pixel_um, error);
    if (status == UF_OK)
        status = uf_read_channel(reader, UF_WIDE, wide_path, 0, wide, 1, &pixel_um, error);
    if (status == UF_OK && (near->image.width != wide->image.width || near->image.height != wide->image.height))
        status = uf_fail(error, UF_INPUT,
                         "%s is %d x %d px, but %s is %d x %d; the two images must have the same size", near_path,
                         near->image.width, near->image.height, wide_path, wide->image.width, wide->image.height);
    return status;
}

static uf_status look_at_pair(uf_reader *reader, int pair, shift_findings *f, uf_error *error)
{
    uf_channel near, wide;
    uf_shift_estimate whole;
    uf_arena_mark mark = uf_arena_now(&reader->work->arena);
    uf_status status =
        read_pair(reader, f->request->images[2 * pair], f->request->images[2 * pair + 1], &near, &wide, error);
    if (status == UF_OK)
        status = uf_shift_find(reader->work, &near, &wide, &whole, error);
    if (status == UF_OK) {
        f->pairs++;
        f->reach_px = hypot(near.image.width, near.image.height) / 2;
        f->score_least = pair ? fmin(f->score_least, whole.score) : whole.score;
        if (whole.trusted)
            add_whole(f, &whole);
    }
    if (status == UF_OK && whole.trusted)
        status = look_at_places(reader->work, &near, &wide, &whole, f, error);
    uf_arena_back(&reader->work->arena, mark);
    return status;
}

/* ---- what it comes to ------------------------------------------------------------------------------ */

static double spread(double sum, double sum2, int n)
{
    return n > 1 ? sqrt(fmax(0, (sum2 - sum * sum / n) / (n - 1))) : 0;
}

static uf_status conclude(shift_findings *f, uf_error *error)
{
    int n = f->trusted_pairs;
    if (!n)
        return uf_fail(
            error, UF_INPUT,
            "the shift cannot be told (score %.2f, 1 is chance): image a field with structure in both channels, in "
            "focus: beads that shine in both, or well spread cells",
            f->score_least);
    f->dx_px = f->dx_sum / n;
    f->dy_px = f->dy_sum / n;
    f->spread_px = fmax(spread(f->dx_sum, f->dx2_sum, n), spread(f->dy_sum, f->dy2_sum, n));
    f->has_similarity = uf_similarity_fit(f->shifts, f->shift_count, f->reach_px, &f->similarity);
    f->sd_px = n > 1 ? f->spread_px / sqrt(n) : f->has_similarity ? f->similarity.shift_sd_px : (double)NAN;
    return UF_OK;
}

/* ---- words ----------------------------------------------------------------------------------------- */

static double departure(const shift_findings *f)
{
    return f->has_similarity ? uf_similarity_departure(&f->similarity, f->reach_px) : (double)NAN;
}

static void put_similarity(uf_text *out, const shift_findings *f)
{
    const uf_similarity *s = &f->similarity;
    if (!f->has_similarity) {
        uf_text_add(
            out, "scale and rotation are not told: fewer than 4 parts of the field show enough in both channels\n");
        return;
    }
    uf_report_row(out, "scale of wide over near, minus 1", 1000 * s->scale, 1000 * s->scale_sd, 3, "per mille");
    uf_report_row(out, "rotation of wide against near (clockwise)", s->rotation_deg, s->rotation_sd_deg, 4, "deg");
    uf_report_row(out, "a plain shift misses, at the corners, by", departure(f), (double)NAN, 2, "px");
    uf_report_row(out, "left at the places looked at, rms", s->residual_px, (double)NAN, 2, "px");
}

static void put_words(uf_text *out, const shift_findings *f)
{
    uf_text_printf(out, "%d pair%s of images, %d parts of them tell a shift\n\n", f->pairs, f->pairs == 1 ? "" : "s",
                   f->shift_count);
    uf_report_row(out, "wide relative to near, to the right", f->dx_px, f->sd_px, 3, "px");
    uf_report_row(out, "wide relative to near, downwards", f->dy_px, f->sd_px, 3, "px");
    if (f->trusted_pairs > 1)
        uf_report_row(out, "from pair to pair, 1 sd", f->spread_px, (double)NAN, 3, "px");
    uf_report_row(out, "score of the weakest pair (1 is chance)", f->score_least, (double)NAN, 2, "");
    put_similarity(out, f);
    uf_text_add(out, "\n");
    if (departure(f) > most_departure_px)
        uf_text_printf(
            out,
            "NOT ENOUGH. A plain shift misses by %.2f px at the corners: the channels differ in scale or rotation. "
            "Only\na shift is applied; align the cameras, or use the middle of the field.\n",
            departure(f));
    else if (f->spread_px > most_spread_px)
        uf_text_add(
            out,
            "ROUGH. The shift wanders from pair to pair: use [shift] estimate = yes, which looks at each field.\n");
    else
        uf_text_add(out, "GOOD. A plain shift is enough.\n");
    uf_text_printf(out, "Written to %s: -i bench.ini -i %s\n", f->request->out_path, f->request->out_path);
}

static uf_status put_json(uf_text *out, const shift_findings *f, uf_error *error)
{
    json_t *o = json_object();
    const uf_similarity *s = &f->similarity;
    double none = (double)NAN;
    json_object_set_new(o, "pairs", json_integer(f->pairs));
    uf_json_number(o, "dx_px", f->dx_px);
    uf_json_number(o, "dy_px", f->dy_px);
    uf_json_number(o, "shift_sd_px", f->sd_px);
    uf_json_number(o, "score", f->score_least);
    uf_json_number(o, "scale_minus_1", f->has_similarity ? s->scale : none);
    uf_json_number(o, "scale_sd", f->has_similarity ? s->scale_sd : none);
    uf_json_number(o, "rotation_deg", f->has_similarity ? s->rotation_deg : none);
    uf_json_number(o, "rotation_sd_deg", f->has_similarity ? s->rotation_sd_deg : none);
    uf_json_number(o, "departure_at_corners_px", departure(f));
    json_object_set_new(o, "plain_shift_is_enough", json_boolean(!(departure(f) > most_departure_px)));
    return uf_json_finish(out, o, error);
}

/* ---- plot ------------------------------------------------------------------------------------------ */

/* What each place departs from the plain shift by, along the two directions scale and rotation act in. */
static uf_status write_plot(const shift_findings *f, const char *path, uf_error *error)
{
    double x[MOST_SHIFTS], along[MOST_SHIFTS], y[MOST_SHIFTS], across[MOST_SHIFTS], none = (double)NAN;
    double s = f->has_similarity ? f->similarity.scale : 0,
           r = f->has_similarity ? f->similarity.rotation_deg * UF_PI / 180 : 0;
    double ends[] = {-f->reach_px, f->reach_px}, scale_line[] = {-s * f->reach_px, s * f->reach_px};
    double turn_line[] = {-r * f->reach_px, r * f->reach_px};
    for (int k = 0; k < f->shift_count; k++) {
        const uf_local_shift *p = &f->shifts[k];
        double dx = p->dx_px - (f->has_similarity ? f->similarity.dx_px : f->dx_px);
        double dy = p->dy_px - (f->has_similarity ? f->similarity.dy_px : f->dy_px);
        x[k] = p->x_px;
        along[k] = dx + r * p->y_px; /* what is left to scale */
        y[k] = p->x_px;
        across[k] = dy - s * p->y_px; /* what is left to rotation */
    }
    const uf_plot_series scale[] = {
        {"fit", 2, ends, scale_line, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE},
        {"parts of the field", f->shift_count, x, along, NULL, NULL, UF_PLOT_DARK, UF_LINE_NONE, UF_MARK_RING,
         UF_SPREAD_NONE}};
    const uf_plot_series turn[] = {
        {"fit", 2, ends, turn_line, NULL, NULL, UF_PLOT_BLUE, UF_LINE_SOLID, UF_MARK_NONE, UF_SPREAD_NONE},
        {"parts of the field", f->shift_count, y, across, NULL, NULL, UF_PLOT_DARK, UF_LINE_NONE, UF_MARK_RING,
         UF_SPREAD_NONE}};
    const uf_plot_panel panels[] = {{"Scale: shift to the right, less the plain one",
                                     {"place from the centre, to the right (px)", none, none, 0},
                                     {"shift to the right (px)", none, none, 0},
                                     scale,
                                     2,
                                     NULL,
                                     0,
                                     NULL,
                                     0},
                                    {"Rotation: shift downwards, less the plain one",
                                     {"place from the centre, to the right (px)", none, none, 0},
                                     {"shift downwards (px)", none, none, 0},
                                     turn,
                                     2,
                                     NULL,
                                     0,
                                     NULL,
                                     0}};
    return uf_plot_file(panels, 2, 1300, 560, path, error);
}

/* ---- all of it ------------------------------------------------------------------------------------- */

static uf_status write_all(const shift_findings *f, const uf_reader *reader, uf_text *out, uf_error *error)
{
    const uf_calibration_request *r = f->request;
    uf_fragment fragment;
    uf_status status = r->plot_path ? write_plot(f, r->plot_path, error) : UF_OK;
    if (status != UF_OK)
        return status;
    uf_fragment_start(&fragment, "shift", reader);
    uf_fragment_number(&fragment, "shift", "dx_px", f->dx_px, 5);
    uf_fragment_number(&fragment, "shift", "dy_px", f->dy_px, 5);
    uf_fragment_word(&fragment, "shift", "estimate", "check");
    status = uf_fragment_write(&fragment, r->out_path, error);
    if (status == UF_OK && r->as_json)
        status = put_json(out, f, error);
    else if (status == UF_OK)
        put_words(out, f);
    return status == UF_OK ? uf_text_check(out, "the report", error) : status;
}

uf_status uf_calibrate_shift(const uf_calibration_request *request, uf_text *out, uf_error *error)
{
    uf_work work = {0};
    uf_reader reader = {.work = &work, .settings = request->settings};
    shift_findings *f = NULL;
    if (request->image_count < 2 || request->image_count % 2)
        return uf_fail(
            error, UF_USAGE,
            "calibrate shift needs images in pairs, near and wide: underfoot calibrate shift NEAR WIDE -o FILE.ini");
    uf_status status = uf_pool_new(&work.pool, request->threads, error);
    if (status == UF_OK)
        status = uf_take(&work, 1, sizeof *f, "shifts", &f, error);
    if (status == UF_OK)
        *f = (shift_findings){.request = request};
    for (int k = 0; status == UF_OK && k < request->image_count / 2; k++)
        status = look_at_pair(&reader, k, f, error);
    if (status == UF_OK)
        status = conclude(f, error);
    if (status == UF_OK)
        status = write_all(f, &reader, out, error);
    uf_reader_free(&reader);
    uf_pool_free(&work.pool);
    uf_arena_free(&work.arena);
    return status;
}
