/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * What the statistics share: scales, and notes that say why a number is missing or how it was made. Nothing here is
 * an error: an experiment with two replicates has values and a difference, it merely has no interval.
 */
#ifndef UF_STATS_NOTES_H
#define UF_STATS_NOTES_H

/* Areas, lengths and counts per cell are compared by ratio (of geometric means: all arithmetic on natural
 * logarithms), gaps, fractions and alignment by difference. */
typedef enum uf_scale { UF_SCALE_DIFFERENCE, UF_SCALE_RATIO } uf_scale;

/* Fewer replicates in an arm than this, and there is neither interval nor p. */
enum { UF_REPLICATES_LEAST = 3 };

/* Bits of a `notes` member. */
enum {
    UF_NOTE_TOO_FEW = 1,              /* too few replicates (wells, blocks, pairs) for an interval and a p */
    UF_NOTE_NO_SPREAD = 2,            /* all values of an arm are the same: no error to measure by */
    UF_NOTE_NOT_POSITIVE = 4,         /* a value at or below 0 has no logarithm: no ratio */
    UF_NOTE_NOT_CONNECTED = 8,        /* no block, or chain of blocks, joins the two arms */
    UF_NOTE_NEGATIVE_AS_ZERO = 16,    /* a variance component came out below 0 and is shown as 0 */
    UF_NOTE_NORMAL = 32,              /* too many values to count permutations: normal approximation */
    UF_NOTE_LEVEL_OUT_OF_REACH = 64,  /* so few values that no exact interval of the level exists */
    UF_NOTE_CORRELATION_FITTED = 128, /* Dunnett by the nearest correlations of one common factor */
    UF_NOTE_DISPERSION_UNKNOWN = 256, /* wells do not tell how much they differ */
    UF_NOTE_CONFOUNDED = 512,         /* the layout cannot tell place from treatment */
    UF_NOTE_SLOPE_AT_LIMIT = 1024,    /* the curve is steeper (or flatter) than the doses can tell */
    UF_NOTE_SLOPE_FIXED = 2048,       /* too few doses for a Hill slope: held at 1 */
    UF_NOTE_NO_PURE_ERROR = 4096,     /* no dose was repeated: the curve itself is tested against a constant */
    UF_NOTE_CENSORED = 8192,          /* some replicates only bound the value */
    UF_NOTE_OUT_OF_REACH = 16384,     /* not reached with the most that was allowed */
    UF_NOTE_MISFIT = 32768            /* the curve misses the means of the doses by more than wells scatter */
};
enum { UF_NOTE_BITS = 16 };

/* A short clause for one note (a single bit), NULL for anything else. */
const char *uf_note_text(unsigned note);

#endif
