/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "optics/detection.h"

#include <math.h>

#include "base/constants.h"

double uf_psf_smoothing(const uf_plan *plan)
{
    double psf_px = plan->psf_sigma_um / plan->pixel_size_um;
    return 1.0 / fmax(1.0, 4.0 * UF_PI * psf_px * psf_px);
}

double uf_smoothed_sd(const uf_plan *plan, const uf_channel *channel, double signal_adu)
{
    double level = channel->background_adu + (signal_adu > 0 ? signal_adu : 0);
    double variance = uf_noise_variance(&channel->noise, level) * uf_psf_smoothing(plan);
    return sqrt(variance + channel->background_sd_adu * channel->background_sd_adu);
}

double uf_gap_limit_nm(const uf_plan *plan, double detection_sigma, const uf_channel *near, const uf_channel *wide,
                       double dye_adu)
{
    double least = detection_sigma * uf_smoothed_sd(plan, near, 0);
    double wide_least = plan->signal == UF_SIGNAL_NEAR ? 0 : detection_sigma * uf_smoothed_sd(plan, wide, 0);
    double ratio = least / (dye_adu > wide_least ? dye_adu : wide_least);
    double limit = uf_decay_gap(&plan->decay, log(ratio / plan->reference_ratio));
    return plan->series.count ? fmin(limit, plan->series.farthest_nm) : limit;
}

double uf_gap_per_ln(const uf_plan *plan, double gap_nm)
{
    double ln = uf_decay_ln(&plan->decay, gap_nm), step = 0.02;
    return fabs(uf_decay_gap(&plan->decay, ln + step) - uf_decay_gap(&plan->decay, ln - step)) / (2 * step);
}

double uf_gap_noise_nm(const uf_plan *plan, double filter, const uf_channel *near, const uf_channel *wide,
                       double near_adu, double dye_adu)
{
    if (!(near_adu > 0) || !(dye_adu > 0))
        return (double)NAN;
    if (plan->series.count) {
        uf_field_kind kind = {&plan->bench, plan->law.model, plan->law.stray};
        double at = uf_decay_gap(&plan->decay, log(near_adu / dye_adu / plan->reference_ratio));
        return uf_series_noise_nm(&plan->series, &kind, near, near_adu, at);
    }
    double near_variance = uf_noise_variance(&near->noise, near->background_adu + near_adu) / (near_adu * near_adu);
    double wide_variance =
        plan->signal == UF_SIGNAL_NEAR
            ? 0
            : uf_noise_variance(&wide->noise, wide->background_adu + dye_adu) / (dye_adu * dye_adu);
    double gap = uf_decay_gap(&plan->decay, log(near_adu / dye_adu / plan->reference_ratio));
    return uf_gap_per_ln(plan, gap) * sqrt(filter * (near_variance + wide_variance));
}
