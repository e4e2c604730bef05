/* SPDX-License-Identifier: GPL-3.0-or-later */
/* What `optics` reports, as numbers: words, JSON and plot are made from these. Run's own. */
#ifndef UF_RUN_OPTICS_NUMBERS_H
#define UF_RUN_OPTICS_NUMBERS_H

#include "optics/decay.h"
#include "run/optics.h"

enum { UF_OPTICS_GAPS = 6, UF_OPTICS_MOVES = 4 };

extern const double uf_optics_gaps_nm[UF_OPTICS_GAPS];

/* Stray light as objectives have it, to show what it does where none is in force (Mattheyses and Axelrod 2006). */
extern const uf_stray uf_usual_stray;

/* One input moved up by its sd, or by a customary step where no sd was given. */
typedef struct uf_optics_move {
    const char *what, *unit; /* what is NULL when the input plays no part */
    double step;
    int is_sd;
    double depth_nm;   /* change of the depth; NaN where the move leaves total reflection */
    double reading_nm; /* change of the gap read where the true gap is the cutoff */
} uf_optics_move;

typedef struct uf_optics_wish {
    int asked;
    double na_low, na_high;               /* equal for a depth; NaN when nothing fulfils the wish */
    double angle_low_deg, angle_high_deg; /* in the substrate */
    double within_nm, depth_nm;           /* what was asked */
} uf_optics_wish;

/* What an earlier file said of the angle, before a later one (a calibration, say) overrode it. */
typedef struct uf_optics_earlier {
    const uf_setting *entry; /* NULL: nothing */
    const char *said;        /* "69.5 (bench.ini:11)" */
    double depth_nm;         /* NaN where it is no total reflection */
} uf_optics_earlier;

enum { UF_OPTICS_EARLIER = 3 };

typedef struct uf_optics_numbers {
    const uf_settings *settings;
    uf_bench bench;
    uf_decay_law law;
    int series_angles;            /* the set-up is the smallest of so many angles; 0: no series in force */
    int angle_from_wish;          /* no angle was given: the set-up is the one wished for */
    double angle_deg, quoted_deg; /* in the substrate; as quoted in angle_n, NaN without */
    double critical_medium_deg, critical_cell_deg;
    double objective_limit_deg; /* NaN for a prism or without objective_na */
    double depth_nm, depth_sd_nm, depth_with_cell_n_nm;
    uf_optics_earlier earlier[UF_OPTICS_EARLIER];
    double interface_s, interface_p, interface_mixed;
    double cutoff_nm, layered_effect_nm; /* reading minus truth at the cutoff */
    double reads_50_nm, reads_100_nm;    /* what an exponential reads for a layered 50 and 100 nm */
    double exponential[UF_OPTICS_GAPS], layered[UF_OPTICS_GAPS], with_stray[UF_OPTICS_GAPS], in_force[UF_OPTICS_GAPS];
    uf_optics_move moves[UF_OPTICS_MOVES]; /* angle or its like, medium, substrate, cell */
    uf_optics_wish for_depth, for_agreement;
} uf_optics_numbers;

/* Finds all of it. UF_INPUT: something is missing, not totally reflected, or a wish that cannot be fulfilled. */
UF_MUST_USE uf_status uf_optics_find(const uf_optics_request *request, uf_optics_numbers *numbers, uf_error *error);

/* Appends the report in words, or as JSON. */
void uf_optics_put_words(uf_text *out, const uf_optics_numbers *numbers);
UF_MUST_USE uf_status uf_optics_put_json(uf_text *out, const uf_optics_numbers *numbers, uf_error *error);

/* Writes the plot as a PNG. UF_OUTPUT when it cannot be written. */
UF_MUST_USE uf_status uf_optics_plot(const uf_optics_numbers *numbers, const char *path, uf_error *error);

#endif
