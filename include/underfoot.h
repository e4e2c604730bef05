/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Underfoot: how closely, over how much area and at how many points cells hold on to a substrate.
 *
 * This header is the whole public interface of the library. The command line is built on it and on
 * the steps below it. Conventions, here and inside:
 *
 *   - A function that can fail returns a uf_status that must be used, and fills the caller's
 *     uf_error. UF_OK is 0. A NULL error record is allowed and simply not filled.
 *   - Lengths carry their unit in the name (gap_nm, size_um, x_px). Pixel (0,0) is top left and
 *     pixel centres lie at whole numbers.
 *   - A value that does not exist is NaN inside and an empty cell in a table.
 *   - Who makes an object frees it; freeing sets the pointer to NULL and may be done twice.
 *   - Nothing here prints, exits, or depends on the locale.
 */
#ifndef UNDERFOOT_H
#define UNDERFOOT_H

#include <stddef.h>

#ifdef __cplusplus
extern "C" {
#endif

#define UF_VERSION "0.1.0"

#if defined(__GNUC__)
#define UF_MUST_USE __attribute__((warn_unused_result))
#define UF_API __attribute__((visibility("default")))
#define UF_PRINTF(format_at, first_at) __attribute__((format(printf, format_at, first_at)))
#else
#define UF_MUST_USE
#define UF_API
#define UF_PRINTF(format_at, first_at)
#endif

/* What came of a call. The command line turns these into its exit status. */
typedef enum uf_status {
    UF_OK = 0,
    UF_USAGE,  /* the caller asked for something that makes no sense (exit status 2) */
    UF_INPUT,  /* a file or a value cannot be used (exit status 2) */
    UF_OUTPUT, /* results could not be written (exit status 3) */
    UF_MEMORY, /* the machine refused memory (exit status 2) */
    UF_STOPPED /* the user stopped the run (exit status 130) */
} uf_status;

enum { UF_ERROR_TEXT = 1024 };

/* One failure in one line: where it happened, what was found and expected, and the mend. */
typedef struct uf_error {
    uf_status status;
    char text[UF_ERROR_TEXT];
} uf_error;

/* A view of float pixels: row y starts at data + y * stride. It owns nothing. */
typedef struct uf_plane {
    float *data;
    int width;
    int height;
    ptrdiff_t stride; /* in pixels, at least width */
} uf_plane;

/* The version of the library in use, "major.minor.patch". */
UF_API const char *uf_version(void);

/* ---- settings -------------------------------------------------------------------------------- */

/* All that an instrument file and an assay file can say, with where each value came from. */
typedef struct uf_settings uf_settings;

typedef enum uf_settings_kind { UF_INSTRUMENT_FILE, UF_ASSAY_FILE } uf_settings_kind;

/* Makes settings that hold the defaults. UF_MEMORY is the only failure. */
UF_API UF_MUST_USE uf_status uf_settings_new(uf_settings **settings, uf_error *error);

/* Frees settings and sets the pointer to NULL; NULL is allowed. */
UF_API void uf_settings_free(uf_settings **settings);

/* Reads one INI file over what is there: later files override earlier ones. An unknown key, a value
 * out of range, or a key this version does not support is UF_INPUT and names file and line. Relative
 * paths in the file are taken relative to the file. */
UF_API UF_MUST_USE uf_status uf_settings_read(uf_settings *settings, const char *path, uf_settings_kind kind,
                                              uf_error *error);

/* Sets one value from text, as if a file had said so: uf_settings_set(s, "light", "wavelength_nm", "488", &e). */
UF_API UF_MUST_USE uf_status uf_settings_set(uf_settings *settings, const char *section, const char *key,
                                             const char *value, uf_error *error);

/* ---- optics ---------------------------------------------------------------------------------- */

/* Critical angle in degrees, measured in the substrate: asin(medium_n / substrate_n) (Snell).
 * NaN unless 0 < medium_n < substrate_n: otherwise no angle is totally reflected. */
UF_API double uf_critical_angle_deg(double substrate_n, double medium_n);

/* 1/e depth of the evanescent *intensity* in nm: wavelength / (4 pi sqrt(na_effective^2 - medium_n^2)),
 * where na_effective = n sin(angle) is the same in every layer (Axelrod, Burghardt and Thompson 1984,
 * Annu. Rev. Biophys. Bioeng. 13:247). The depth of the field amplitude is twice as long and is not
 * what this returns. NaN where na_effective <= medium_n: light then propagates and nothing decays. */
UF_API double uf_depth_nm(double wavelength_nm, double na_effective, double medium_n);

/* ---- the main job ---------------------------------------------------------------------------- */

typedef struct uf_measure_request {
    const char *near_path; /* evanescent image of the field */
    const char *wide_path; /* widefield image of the same field; NULL with label = adhesion-protein: cells are then
                              outlined in the near image */
    const char
        *mask_path; /* label image, 0 outside cells, of the same size: takes the place of segmentation; or NULL */
    const char *nuclei_path; /* image of nuclei, taken as the wide image was: one cell each; or NULL */
    const char *out_dir;     /* made when missing; files of an earlier run in it are replaced */
    int threads;             /* 1 or more; results do not depend on it */
    const char *command;     /* what the user typed, for the log; may be NULL */
} uf_measure_request;

typedef struct uf_measure_summary {
    int cells;          /* cells found */
    int cells_used;     /* cells that count (not dropped by the edge rule) */
    int cells_attached; /* used cells whose attachment fraction reaches the assay's threshold */
    int spots;
    double spread_area_median_um2; /* medians over used cells; NaN without cells */
    double contact_area_median_um2;
    double attachment_fraction_median;
    double gap_median_nm;
    double depth_nm; /* 1/e depth of the evanescent intensity in force */
    double seconds;
    char overlay[300];   /* path of the overlay below out_dir, empty when none was asked for */
    char warnings[1024]; /* one a line, empty when there are none */
    char flags[2048];    /* flags of the field, one a line with what to do about it */
} uf_measure_summary;

/* Measures one field from its two image files and writes tables, images and run.json under out_dir
 * (README lists them). Everything is written under a temporary name and renamed, so that a failure
 * leaves whole files or none. Errors: UF_INPUT for images or settings that cannot be used,
 * UF_OUTPUT when a result cannot be written, UF_MEMORY. */
UF_API UF_MUST_USE uf_status uf_measure(const uf_settings *settings, const uf_measure_request *request,
                                        uf_measure_summary *summary, uf_error *error);

#ifdef __cplusplus
}
#endif
#endif
