/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Rows: plain structs that the steps fill and that become table rows. A number that does not exist is NaN.
 * What each member means, its unit and its column stand once, in record/columns.c.
 */
#ifndef UF_RECORD_RECORDS_H
#define UF_RECORD_RECORDS_H

#include <stddef.h>
#include <stdint.h>

/* Things worth telling about a field or a cell; in a row they are words joined by ';'. */
typedef enum uf_flag {
    UF_FLAG_EDGE,             /* cell: cut by the image edge */
    UF_FLAG_SATURATED,        /* saturated pixels inside */
    UF_FLAG_TOO_DIM,          /* the detection limit lies below the contact cutoff: no contact reported */
    UF_FLAG_TOUCHING,         /* cell: shares an outline with another */
    UF_FLAG_UNRESOLVED,       /* cell: more than a quarter of it has no measurable gap */
    UF_FLAG_EMPTY,            /* field: no cells */
    UF_FLAG_SHIFT_UNSURE,     /* field: the estimated shift cannot be trusted and was not applied */
    UF_FLAG_SHIFT_DIFFERS,    /* field: the estimate differs from the bench's value by more than 1 px */
    UF_FLAG_DISPLAY_SCALED,   /* field: looks contrast-stretched to 8 bits; ratios mean nothing */
    UF_FLAG_LAYERED_EFFECT,   /* field: a layered model would read the cutoff more than 3 nm elsewhere */
    UF_FLAG_OUT_OF_FOCUS,     /* field: either channel's focus is low */
    UF_FLAG_UNEVEN,           /* field: the background slopes by more than a quarter of itself */
    UF_FLAG_CROWDED,          /* field: less than a twentieth of it is free of cells */
    UF_FLAG_LOW_SIGNAL,       /* field: the median cell is less than ten times its noise in either channel */
    UF_FLAG_NEAR_TOO_BRIGHT,  /* field: near is brighter than the reference allows over much of the median cell */
    UF_FLAG_CHANNELS_SWAPPED, /* field: near looks like a wide image and wide like a near one */
    UF_FLAG_MOVED,            /* cell: light of the near image lies beside its outline */
    UF_FLAG_CLIPPED,          /* cell, field: pixels at the lowest count, cut off by the camera's offset */
    UF_FLAG_SERIES_MISFIT,    /* field: the pages of a series do not obey the field in force */
    UF_FLAG_NOT_REFLECTED,    /* field: light runs on into cells at this angle */
    UF_FLAG_COUNT
} uf_flag;

typedef uint32_t uf_flags; /* bit k is flag k */

/* The word for one flag, "edge". */
const char *uf_flag_word(uf_flag flag);

/* What it asks for, in a few words. */
const char *uf_flag_advice(uf_flag flag);

/* 2 nm bins of gap: bin k holds UF_GAP_HISTOGRAM_FROM_NM + 2 k <= gap < ... + 2, ends collect the rest. */
enum { UF_GAP_BINS = 280, UF_GAP_BIN_NM = 2, UF_GAP_HISTOGRAM_FROM_NM = -160 };

typedef enum uf_gap_kind { UF_GAP_NONE, UF_GAP_RELATIVE, UF_GAP_ABSOLUTE } uf_gap_kind;

typedef struct uf_cell {
    int cell; /* 1 .. */
    double x_px, y_px, x_um, y_um;
    int edge; /* 1 when cut by the image edge */
    double edge_weight;
    int used; /* 1 when the cell counts */
    const char *used_reason;
    double spread_area_um2, perimeter_um, circularity, caliper_max_um, caliper_min_um, elongation, convex_fill,
        orientation_deg;
    double contact_area_um2, contact_area_low_um2, contact_area_high_um2;
    double attachment_fraction, attachment_fraction_low, attachment_fraction_high;
    double contact_area_minus10_um2, contact_area_plus10_um2;
    double band_focal_um2, band_close_um2, band_far_um2, unresolved_um2;
    double contact_patches; /* a count, NaN when contact is not reported */
    double largest_patch_um2, contact_in_rim_fraction, rim_area_fraction;
    double gap_median_nm, gap_p05_nm, gap_p25_nm, gap_p75_nm, gap_p95_nm, gap_core_median_nm;
    double gap_random_nm, gap_systematic_nm, gap_limit_nm, cleft_volume_um3;
    double near_mean_adu, wide_mean_adu, ratio_mean, above_reference_fraction;
    double spot_count; /* a count, NaN when spots are not reported */
    double spots_per_100um2, spot_area_total_um2, spot_area_median_um2, spot_length_median_um, spot_alignment;
    uf_gap_kind gap_kind;
    uf_flags flags;
    double touching_um;                    /* length of the border shared with other cells; not a column */
    double dye_mean_adu;                   /* of what near is divided by; not a column */
    double near_variation, wide_variation; /* standard deviation over mean inside the cell; not columns */
    double contact_border_um;              /* length of the borders of contact; not a column */
    int box_x0, box_y0, box_x1, box_y1;    /* half-open bounding box, pixels; not a column */
    uint32_t gap_histogram[UF_GAP_BINS];   /* resolved pixels; not a column */
} uf_cell;

typedef struct uf_spot {
    int cell;
    int spot; /* 1 .. within the cell */
    double x_px, y_px, x_um, y_um;
    double area_um2, length_um, width_um, orientation_deg;
    double gap_nm, contrast_nm, near_peak_adu, rim_distance_um;
} uf_spot;

typedef enum uf_field_state { UF_FIELD_OK, UF_FIELD_FLAGGED, UF_FIELD_FAILED } uf_field_state;

typedef struct uf_field {
    const char *field_id;
    uf_field_state status;
    const char *reason;
    int cells;
    int cells_counted;
    double field_area_mm2, cells_per_mm2, contact_um2_per_mm2;
    int spots;
    double shift_dx_px, shift_dy_px, shift_score;
    double near_background_adu, wide_background_adu, near_noise_adu, wide_noise_adu;
    double near_saturated_fraction, wide_saturated_fraction;
    double near_focus, wide_focus, near_unevenness, wide_unevenness;
    double reference_ratio, depth_nm, pedestal_fraction, haze_fraction, series_chi_square;
    uf_flags flags;
} uf_field;

#endif
