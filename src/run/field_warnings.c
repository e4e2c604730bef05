/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/field_warnings.h"

#include <math.h>

#include "run/read_channel.h"
#include "run/series_plan.h"

typedef struct warning_job {
    const uf_settings *settings;
    const uf_plan *plan;
    const uf_field_result *result;
    uf_text *out;
} warning_job;

static void warn_optics(warning_job *job)
{
    const uf_plan *plan = job->plan;
    if (uf_bench_leaks_into_cell(&plan->bench))
        uf_text_printf(
            job->out,
            "n sin(angle) %.4f does not exceed cell_n + 2 sd (%.3f): light may pass into the cell where it "
            "touches; a steeper angle avoids it\n",
            plan->bench.na_effective, plan->bench.cell_n + 2 * plan->bench.cell_n_sd);
    if (plan->series.count && plan->series.farthest_nm < UF_SERIES_FARTHEST_NM)
        uf_text_printf(
            job->out,
            "with this stray light the series cannot tell gaps beyond %.0f nm from closer ones; places darker "
            "than that are left unresolved\n",
            plan->series.farthest_nm);
    if (plan->has_gap && fabs(plan->layered_effect_nm) > 3)
        uf_text_printf(
            job->out,
            "a layered model reads the %.4g nm cutoff %+.1f nm differently from the exponential in force; %s\n",
            job->settings->contact.cutoff_nm, -plan->layered_effect_nm,
            plan->series.count ? "a series shows the full difference: use model = layered"
                               : "the two agree best around n sin(angle) 1.44");
}

static void warn_settings(warning_job *job)
{
    for (int k = 0; k < UF_CHANNELS; k++) {
        if (isnan(job->settings->camera[k].gain_e_per_adu))
            uf_text_printf(
                job->out,
                "no gain_e_per_adu in [%s.camera]: noise and detection limit are estimated from the image\n",
                uf_channel_names[k]);
        if (!job->settings->flat[k].file)
            uf_text_printf(job->out, "no [%s.flat]: uneven light goes into the gaps\n", uf_channel_names[k]);
    }
}

static void warn_exposures(warning_job *job)
{
    const uf_settings *s = job->settings;
    for (int k = 0; k < UF_CHANNELS; k++) {
        double now = s->camera[k].exposure_ms, then = s->reference.exposure_ms[k];
        if (!isnan(then) && isnan(now))
            uf_text_printf(
                job->out,
                "the reference's %s image was exposed for %.6g ms; this run's exposure is not told (exposure_ms in "
                "[%s.camera]) and taken to be the same\n",
                uf_channel_names[k], then, uf_channel_names[k]);
        else if (now < then || now > then)
            uf_text_printf(job->out,
                           "%s exposures differ: %.6g ms here, %.6g ms at the reference; its ratio is converted\n",
                           uf_channel_names[k], now, then);
    }
}

static void warn_reference(warning_job *job)
{
    const uf_plan *plan = job->plan;
    if (plan->has_gap && !plan->reference_from_cell && !plan->series.count)
        warn_exposures(job);
    if (!plan->has_gap)
        uf_text_printf(job->out,
                       "an adhesion protein's light tells no gap: gap columns are empty, spots are told by "
                       "near contrast%s\n",
                       isnan(job->settings->contact.near_threshold_adu)
                           ? ", and contact is not reported without near_threshold_adu in [contact]"
                           : ", contact by near_threshold_adu");
    else if (plan->is_relative)
        uf_text_printf(
            job->out, "gaps are relative%s: compare them within this bench and label, not with measured distances\n",
            plan->reference_from_cell ? " to each cell's own closest part, so that a cell lifted as a whole does "
                                        "not show"
                                      : "");
}

static void warn_field(warning_job *job)
{
    const uf_field *field = &job->result->field;
    if (field->flags >> UF_FLAG_DISPLAY_SCALED & 1u)
        uf_text_add(job->out, "the images look contrast-stretched to 8 bits: their ratios mean nothing; save the "
                              "camera's own counts\n");
    if (field->flags >> UF_FLAG_SHIFT_UNSURE & 1u)
        uf_text_add(job->out, "the shift between near and wide could not be found with confidence; the bench's "
                              "value was used. Do the two files show one field, the same way round, in focus?\n");
    if (field->flags >> UF_FLAG_SHIFT_DIFFERS & 1u)
        uf_text_add(job->out, "this field's own shift differs from the bench's by more than a pixel; check [shift] "
                              "or set estimate = yes\n");
    if (field->flags >> UF_FLAG_SERIES_MISFIT & 1u)
        uf_text_printf(
            job->out,
            "the pages of the series do not obey the field in force (median reduced chi-square %.1f): check "
            "angles_deg, power and the indices, and whether the cells moved or bleached between pages\n",
            field->series_chi_square);
    if (field->flags >> UF_FLAG_EMPTY & 1u)
        uf_text_printf(
            job->out,
            "no cells were found: the field is %.4g x %.4g um, and what is smaller than min_area_um2 = %.4g does "
            "not count; check [pixel] size_um, and look at the wide image\n",
            job->result->wide.image.width * job->plan->pixel_size_um,
            job->result->wide.image.height * job->plan->pixel_size_um, job->settings->cells.min_area_um2);
}

void uf_field_warn(uf_text *out, const uf_settings *settings, const uf_plan *plan, const uf_field_result *result)
{
    warning_job job = {settings, plan, result, out};
    warn_optics(&job);
    warn_settings(&job);
    warn_reference(&job);
    warn_field(&job);
}
