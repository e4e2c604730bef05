/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Settings: facts about the bench (instrument file) and choices about the analysis (assay file). Each
 * exists once, in THE table (settings/table.c): name, kind, default, range, help. Parsing, `--help`,
 * docs/settings.md and run.json all come from there. A real number that was not given is NaN, a path NULL.
 */
#ifndef UF_SETTINGS_SETTINGS_H
#define UF_SETTINGS_SETTINGS_H

#include <stddef.h>

#include "base/text.h"

typedef enum uf_channel_name { UF_NEAR, UF_WIDE, UF_CHANNELS } uf_channel_name;

typedef enum uf_polarization { UF_POLARIZATION_S, UF_POLARIZATION_P, UF_POLARIZATION_MIXED } uf_polarization;
typedef enum uf_geometry { UF_GEOMETRY_OBJECTIVE, UF_GEOMETRY_PRISM } uf_geometry;
typedef enum uf_substrate_name {
    UF_SUBSTRATE_COVERGLASS,
    UF_SUBSTRATE_BK7,
    UF_SUBSTRATE_FUSED_SILICA
} uf_substrate_name;
typedef enum uf_medium_name { UF_WATER, UF_CULTURE_MEDIUM, UF_PBS } uf_medium_name;
typedef enum uf_decay_model { UF_DECAY_EXPONENTIAL, UF_DECAY_LAYERED, UF_DECAY_TABLE } uf_decay_model;
typedef enum uf_estimate { UF_ESTIMATE_CHECK, UF_ESTIMATE_YES, UF_ESTIMATE_NO } uf_estimate;
typedef enum uf_reference_kind { UF_REFERENCE_CELL, UF_REFERENCE_FILM } uf_reference_kind;
typedef enum uf_gap_is { UF_GAP_MEASURED, UF_GAP_ASSUMED } uf_gap_is;
typedef enum uf_reference_from { UF_FROM_WELLS, UF_FROM_POOLED, UF_FROM_CELL } uf_reference_from;
typedef enum uf_label { UF_LABEL_MEMBRANE, UF_LABEL_CYTOSOL, UF_LABEL_ADHESION_PROTEIN } uf_label;
typedef enum uf_edge_cells { UF_EDGE_WEIGHT, UF_EDGE_KEEP, UF_EDGE_DROP } uf_edge_cells;
typedef enum uf_overlay_choice {
    UF_OVERLAY_YES,
    UF_OVERLAY_FLAGGED,
    UF_OVERLAY_FULL,
    UF_OVERLAY_NO
} uf_overlay_choice;
typedef enum uf_yes_no { UF_YES, UF_NO } uf_yes_no;

typedef struct uf_camera_settings {
    double offset_adu, gain_e_per_adu, read_noise_e, full_scale_adu, excess_noise, exposure_ms;
    double background_adu, background_sd_adu;
    char *dark, *defects;
} uf_camera_settings;

enum { UF_SETTINGS_LIMIT = 128, UF_SETTING_NOT_GIVEN = -1, UF_REALS_LIMIT = 32 };

/* A list of numbers as one setting holds it; count 0: not given. */
typedef struct uf_reals {
    int count;
    double values[UF_REALS_LIMIT];
} uf_reals;

struct uf_settings {
    struct {
        double wavelength_nm;
        int polarization;
    } light;
    struct {
        int geometry;
        int substrate, medium; /* by name, or UF_SETTING_NOT_GIVEN */
        double substrate_n, medium_n, cell_n, cell_n_sd, substrate_n_sd, medium_n_sd;
        double temperature_c, coating_n, coating_nm;
        double angle_deg, angle_n, na_effective, depth_nm;
        double angle_sd_deg, na_effective_sd, depth_sd_nm, objective_na;
    } interface;
    struct {
        int model;
        char *file;
        double scattered_fraction, scattered_depth_nm;
    } decay;
    struct {
        double size_um;
    } pixel;
    uf_camera_settings camera[UF_CHANNELS];
    struct {
        char *file;
    } flat[UF_CHANNELS];
    struct {
        double dx_px, dy_px;
        int estimate;
    } shift;
    struct {
        double ratio, ratio_sd, gap_nm, gap_sd_nm, normalisation_sd;
        int gap_is;                      /* measured or assumed */
        int kind, from;                  /* from: UF_SETTING_NOT_GIVEN when ratio is measured */
        double exposure_ms[UF_CHANNELS]; /* of its images; NaN: not told */
        char *flat[UF_CHANNELS]; /* fingerprint of the flat its images were corrected by, "none", NULL: not told */
    } reference;
    struct {
        uf_reals angles_deg, power;
    } series;
    struct {
        int label;
        double smooth_um, min_area_um2, max_area_um2, split;
        int edge_cells;
    } cells;
    struct {
        double cutoff_nm, focal_nm, close_nm, detection_sigma, attached_threshold, rim_um, min_patch_um2;
        double near_threshold_adu;
    } contact;
    struct {
        double min_length_um, max_length_um, contrast_sigma;
    } spots;
    struct {
        double min_cells_per_well;
    } compare;
    struct {
        int overlay, maps;
    } output;
    char *origin[UF_SETTINGS_LIMIT]; /* "FILE:LINE" of entry k of the table, NULL for a default */
    /* What an earlier file said of entry k before a later one overrode it: "VALUE (FILE:LINE)", NULL: nothing; and the
     * number of a real. */
    char *overridden[UF_SETTINGS_LIMIT];
    double overridden_real[UF_SETTINGS_LIMIT];
};

typedef enum uf_setting_kind {
    UF_SETTING_REAL,
    UF_SETTING_REALS,
    UF_SETTING_CHOICE,
    UF_SETTING_PATH,
    UF_SETTING_WORD, /* text as it stands */
    UF_SETTING_LATER
} uf_setting_kind;

typedef struct uf_setting {
    uf_settings_kind file;
    const char *section, *key; /* the key carries the unit */
    uf_setting_kind kind;
    size_t offset;       /* in struct uf_settings */
    double least, most;  /* allowed range of a real, or of each of a list, both included */
    double initial;      /* default of a real (NaN: none) or of a choice (its index, or UF_SETTING_NOT_GIVEN) */
    const char *choices; /* "s|p|mixed"; a word after '!' is known but not in this version */
    const char *group;   /* of the entries with one group name, one file may give only one */
    const char *help;    /* one sentence */
} uf_setting;

extern const uf_setting uf_setting_table[];
extern const int uf_setting_count;

/* Reads INI text over what is there; `path` names the file in messages and origins, and relative paths
 * among the values are taken relative to it. Errors name file and line (UF_INPUT). */
UF_MUST_USE uf_status uf_settings_parse(uf_settings *settings, const char *text, size_t length, const char *path,
                                        uf_settings_kind kind, uf_error *error);

/* What any optics needs: wavelength and the two indices, as numbers or by name. UF_INPUT names what is missing. */
UF_MUST_USE uf_status uf_settings_check_optics(const uf_settings *settings, uf_error *error);

/* What measuring needs beyond single values: required settings present, angle or its like given, bands in
 * order. UF_INPUT names the setting and what to add. */
UF_MUST_USE uf_status uf_settings_check(const uf_settings *settings, uf_error *error);

/* Appends the value of entry k as text, nothing when it was not given. */
void uf_setting_value(uf_text *out, const uf_settings *settings, int k);

/* Index of the entry that sets `member` (an offset in struct uf_settings), to name it in messages. */
const uf_setting *uf_setting_at(size_t member);

/* Appends the settings as lines for `--help`, or as the page docs/settings.md. */
void uf_settings_help(uf_text *out, uf_settings_kind kind);
void uf_settings_page(uf_text *out);

#endif
