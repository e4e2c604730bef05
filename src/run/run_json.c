/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/run_json.h"

#include "run/run_json_parts.h"

#include <fftw3.h>
#include <jansson.h>
#include <math.h>
#include <png.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <tiffio.h>
#include <xxhash.h>

/* Text that may not be UTF-8 (a file name): bytes above 127 that do not decode become '?'. */
json_t *uf_json_text(const char *text)
{
    json_t *value = json_string(text);
    if (value)
        return value;
    char *copy = uf_copy_string(text);
    for (char *p = copy; p && *p; p++)
        if ((unsigned char)*p > 127)
            *p = '?';
    value = copy ? json_string(copy) : NULL;
    free(copy);
    return value;
}

static json_t *json_number(double value)
{
    return isfinite(value) ? json_real(uf_round_digits(value, 12)) : json_null();
}

json_t *uf_settings_json(const uf_settings *settings)
{
    json_t *list = json_array();
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        uf_text value = {0};
        if (entry->kind != UF_SETTING_LATER)
            uf_setting_value(&value, settings, k);
        if (value.length) {
            json_t *item = json_object();
            json_object_set_new(item, "section", json_string(entry->section));
            json_object_set_new(item, "key", json_string(entry->key));
            json_object_set_new(item, "value", uf_json_text(value.bytes));
            json_object_set_new(item, "from", uf_json_text(settings->origin[k] ? settings->origin[k] : "default"));
            json_array_append_new(list, item);
        }
        uf_text_free(&value);
    }
    return list;
}

/* What earlier files said and later ones overrode. */
json_t *uf_overridden_json(const uf_settings *settings)
{
    json_t *list = json_array();
    for (int k = 0; k < uf_setting_count; k++) {
        if (!settings->overridden[k])
            continue;
        json_t *item = json_object();
        json_object_set_new(item, "section", json_string(uf_setting_table[k].section));
        json_object_set_new(item, "key", json_string(uf_setting_table[k].key));
        json_object_set_new(item, "was", uf_json_text(settings->overridden[k]));
        json_array_append_new(list, item);
    }
    return list;
}

static json_t *inputs_json(const uf_run_story *story)
{
    json_t *list = json_array();
    for (int k = 0; k < story->input_count; k++) {
        char fingerprint[17];
        (void)snprintf(fingerprint, sizeof fingerprint, "%016llx", (unsigned long long)story->inputs[k].fingerprint);
        json_t *item = json_object();
        json_object_set_new(item, "role", json_string(story->inputs[k].role));
        json_object_set_new(item, "path", uf_json_text(story->inputs[k].path));
        json_object_set_new(item, "bytes", json_integer((json_int_t)story->inputs[k].bytes));
        json_object_set_new(item, "xxh3_64", json_string(fingerprint));
        json_array_append_new(list, item);
    }
    return list;
}

static json_t *series_json(const uf_series *series)
{
    json_t *o = json_object(), *na = json_array(), *sd = json_array();
    for (int k = 0; k < series->count; k++)
        json_array_append_new(na, json_number(series->na_effective[k]));
    for (int k = 0; k < UF_SERIES_GAPS; k += 5)
        json_array_append_new(sd, json_number(series->systematic_nm[k]));
    json_object_set_new(o, "na_effective", na);
    json_object_set_new(o, "near_page", json_integer(series->widest + 1));
    json_object_set_new(o, "farthest_nm", json_number(series->farthest_nm));
    json_object_set_new(o, "gap_systematic_nm_every_50_nm", sd);
    return o;
}

static json_t *plan_json(const uf_plan *plan)
{
    json_t *o = json_object();
    const uf_bench *b = &plan->bench;
    json_object_set_new(o, "na_effective", json_number(b->na_effective));
    json_object_set_new(o, "na_effective_sd", json_number(b->na_effective_sd));
    json_object_set_new(o, "depth_nm", json_number(plan->depth_nm));
    json_object_set_new(o, "depth_sd_nm", json_number(plan->depth_sd_nm));
    json_object_set_new(o, "reference_ratio_at_gap_0", json_number(plan->reference_ratio));
    json_object_set_new(o, "reference_sd_relative", json_number(plan->reference_sd));
    json_object_set_new(o, "normalisation_sd_relative", json_number(plan->normalisation_sd));
    json_object_set_new(o, "pixel_size_um", json_number(plan->pixel_size_um));
    json_object_set_new(o, "psf_sigma_um", json_number(plan->psf_sigma_um));
    json_object_set_new(o, "layered_effect_at_cutoff_nm", json_number(plan->layered_effect_nm));
    if (plan->series.count)
        json_object_set_new(o, "series", series_json(&plan->series));
    return o;
}

json_t *uf_lines_json(const char *lines)
{
    json_t *list = json_array();
    while (*lines) {
        size_t length = strcspn(lines, "\n");
        if (length)
            json_array_append_new(list, json_stringn(lines, length));
        lines += length + (lines[length] == '\n');
    }
    return list;
}

json_t *uf_libraries_json(void)
{
    char tiff[32], xxhash[32];
    (void)snprintf(tiff, sizeof tiff, "%.*s", (int)strcspn(TIFFGetVersion(), "\n"), TIFFGetVersion());
    unsigned version = XXH_versionNumber();
    (void)snprintf(xxhash, sizeof xxhash, "%u.%u.%u", version / 10000, version / 100 % 100, version % 100);
    json_t *o = json_object();
    json_object_set_new(o, "libtiff", json_string(tiff));
    json_object_set_new(o, "libpng", json_string(png_get_libpng_ver(NULL)));
    json_object_set_new(o, "fftw", json_string(fftwf_version));
    json_object_set_new(o, "jansson", json_string(jansson_version_str()));
    json_object_set_new(o, "xxhash", json_string(xxhash));
    return o;
}

static void reference_of_gap(uf_text *out, const uf_settings *s, const uf_plan *plan)
{
    if (plan->reference_from_cell)
        uf_text_printf(out, " relative to each cell's own closest hundredth, assumed to lie at %.4g nm. ",
                       plan->reference_gap_nm);
    else if (s->reference.kind == UF_REFERENCE_FILM)
        uf_text_printf(out,
                       " relative to a ratio of %.4g measured on a film at %.4g nm, corrected for one layer of dye "
                       "and for medium above it. ",
                       s->reference.ratio, plan->reference_gap_nm);
    else
        uf_text_printf(out, " relative to a measured %s of %.4g at a gap of %.4g nm. ",
                       plan->signal == UF_SIGNAL_NEAR ? "near signal" : "ratio", s->reference.ratio,
                       plan->reference_gap_nm);
}

static void methods_of_gap(uf_text *out, const uf_settings *s, const uf_plan *plan)
{
    static const char *const models[] = {[UF_FIELD_EXPONENTIAL] = "an exponential decay",
                                         [UF_FIELD_LAYERED] =
                                             "the field of a substrate, medium and cell of three indices (layered),",
                                         [UF_FIELD_TABLE] = "a measured decay (table), in an evanescent field"};
    const char *field = models[plan->law.model];
    double least = (double)INFINITY, most = 0;
    for (int k = 0; k < plan->series.count; k++) {
        least = fmin(least, s->series.angles_deg.values[k]);
        most = fmax(most, s->series.angles_deg.values[k]);
    }
    if (plan->series.count)
        uf_text_printf(
            out,
            "The membrane-substrate gap was fitted, pixel by pixel and weighted by the noise, to near images "
            "at %d angles of %.4g to %.4g deg by %s with a 1/e depth of %.1f nm at the smallest angle (medium "
            "index %.4f%s",
            plan->series.count, least, most, field, plan->depth_nm, plan->bench.medium_n,
            plan->law.model == UF_FIELD_LAYERED ? ", cell index " : "");
    else
        uf_text_printf(
            out,
            "The near/wide ratio was converted to the membrane-substrate gap by %s with a 1/e depth of %.1f "
            "nm (s.d. %.1f nm; medium index %.4f",
            field, plan->depth_nm, plan->depth_sd_nm, plan->bench.medium_n);
    if (plan->series.count && plan->law.model == UF_FIELD_LAYERED)
        uf_text_printf(out, "%.4f", plan->bench.cell_n);
    uf_text_add(out, ")");
    if (plan->law.stray.fraction > 0)
        uf_text_printf(out, ", %.3g of it stray light of %.4g nm depth,", plan->law.stray.fraction,
                       plan->law.stray.depth_nm);
    if (plan->series.count)
        uf_text_add(out, "; amplitude and gap were free and no reference was used. ");
    else
        reference_of_gap(out, s, plan);
}

void uf_methods_paragraph(uf_text *out, const uf_settings *s, const uf_plan *plan)
{
    const uf_bench *b = &plan->bench;
    uf_text_printf(out,
                   "Near-surface (evanescent, %.4g nm, n sin angle %.4f) and widefield images were measured with "
                   "Underfoot %s. Cells were outlined in the widefield image at half of each cell's own level over "
                   "its local background and touching cells split by shape. ",
                   b->wavelength_nm, b->na_effective, UF_VERSION);
    methods_of_gap(out, s, plan);
    uf_text_printf(out,
                   "Contact was called where the gap was at most %.4g nm, in patches of at least %.3g square "
                   "micrometres; pixels whose signal was below %.3g s.d. of its noise were not assigned a gap. The "
                   "gap is an approximation: it is model-dependent and relative to the dye of the ventral membrane.",
                   s->contact.cutoff_nm, s->contact.min_patch_um2, s->contact.detection_sigma);
}

static json_t *build(const uf_run_story *story)
{
    uf_text methods = {0};
    uf_methods_paragraph(&methods, story->settings, story->plan);
    json_t *o = json_object(), *varies = json_object();
    json_object_set_new(o, "program", json_string("underfoot"));
    json_object_set_new(o, "version", json_string(UF_VERSION));
    json_object_set_new(o, "settings", uf_settings_json(story->settings));
    json_object_set_new(o, "overridden", uf_overridden_json(story->settings));
    json_object_set_new(o, "in_force", plan_json(story->plan));
    json_object_set_new(o, "inputs", inputs_json(story));
    json_object_set_new(o, "warnings", uf_lines_json(story->warnings));
    json_object_set_new(o, "methods", uf_json_text(methods.bytes ? methods.bytes : ""));
    json_object_set_new(varies, "command", story->command ? uf_json_text(story->command) : json_null());
    json_object_set_new(varies, "seconds", json_number(story->seconds));
    json_object_set_new(varies, "libraries", uf_libraries_json());
    json_object_set_new(o, "varies_between_runs", varies);
    uf_text_free(&methods);
    return o;
}

uf_status uf_run_json(uf_text *out, const uf_run_story *story, uf_error *error)
{
    json_t *o = build(story);
    char *text = json_dumps(o, JSON_INDENT(2) | JSON_REAL_PRECISION(12));
    json_decref(o);
    if (!text)
        return uf_fail_memory(error, "run.json");
    uf_text_add(out, text);
    uf_text_add(out, "\n");
    free(text);
    return uf_text_check(out, "run.json", error);
}
