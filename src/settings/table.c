/* SPDX-License-Identifier: GPL-3.0-or-later */
/* THE table of settings. A new setting is one member in settings.h and one line here. */
#include <math.h>

#include "settings/settings.h"

#define AT(member) offsetof(struct uf_settings, member)
#define NONE ((double)NAN)

#define KEY(file, section, key, kind, member, least, most, initial, choices, group, help) \
    {UF_##file##_FILE, section, key, UF_SETTING_##kind, member, least, most, initial, choices, group, help}

#define I_REAL(section, key, member, least, most, initial, help) \
    KEY(INSTRUMENT, section, key, REAL, AT(member), least, most, initial, NULL, NULL, help)
#define I_REALS(section, key, member, least, most, help) \
    KEY(INSTRUMENT, section, key, REALS, AT(member), least, most, NONE, NULL, NULL, help)
#define I_CHOICE(section, key, member, choices, initial, help) \
    KEY(INSTRUMENT, section, key, CHOICE, AT(member), 0, 0, initial, choices, NULL, help)
#define I_PATH(section, key, member, help) \
    KEY(INSTRUMENT, section, key, PATH, AT(member), 0, 0, 0, NULL, NULL, help)
#define I_WORD(section, key, member, help) \
    KEY(INSTRUMENT, section, key, WORD, AT(member), 0, 0, 0, NULL, NULL, help)
#define I_ONE_OF(group, section, key, member, least, most, help) \
    KEY(INSTRUMENT, section, key, REAL, AT(member), least, most, NONE, NULL, group, help)
#define I_ONE_CHOICE_OF(group, section, key, member, choices, help) \
    KEY(INSTRUMENT, section, key, CHOICE, AT(member), 0, 0, UF_SETTING_NOT_GIVEN, choices, group, help)
#define A_REAL(section, key, member, least, most, initial, help) \
    KEY(ASSAY, section, key, REAL, AT(member), least, most, initial, NULL, NULL, help)
#define A_CHOICE(section, key, member, choices, initial, help) \
    KEY(ASSAY, section, key, CHOICE, AT(member), 0, 0, initial, choices, NULL, help)
#define A_LATER(section, key, help) KEY(ASSAY, section, key, LATER, 0, 0, 0, 0, NULL, NULL, help)

#define CAMERA(section, channel)                                                                               \
    I_REAL(section, "offset_adu", camera[channel].offset_adu, -1e6, 1e6, 0,                                    \
           "Counts of a pixel in the dark.")                                                                   \
    , I_REAL(section, "gain_e_per_adu", camera[channel].gain_e_per_adu, 1e-4, 1e4, NONE,                       \
             "Electrons a count. Without it the noise is estimated from the image.")                           \
    , I_REAL(section, "read_noise_e", camera[channel].read_noise_e, 0, 1e4, 0,                                 \
             "Read noise, electrons (1 sigma).")                                                               \
    , I_REAL(section, "full_scale_adu", camera[channel].full_scale_adu, 1, 1e9, NONE,                          \
             "Count at which the camera saturates. Default: where counts pile up, else what the file's bits can hold.")      \
    , I_REAL(section, "excess_noise", camera[channel].excess_noise, 1, 4, 1,                                   \
             "Excess noise factor of an amplifying camera (about 1.41), 1 for others.")                        \
    , I_REAL(section, "exposure_ms", camera[channel].exposure_ms, 1e-6, 1e9, NONE,                              \
             "Exposure of the images; with the reference's own, a ratio taken at others is converted.")         \
    , I_REAL(section, "background_adu", camera[channel].background_adu, -1e6, 1e6, NONE,                       \
             "Light of a blank field above the offset. Default: blank wells of the sheet, else each field's own.") \
    , I_REAL(section, "background_sd_adu", camera[channel].background_sd_adu, 0, 1e6, 0, "1 sigma of it.")      \
    , I_PATH(section, "dark", camera[channel].dark, "Dark image subtracted instead of offset_adu.")            \
    , I_PATH(section, "defects", camera[channel].defects,                                                      \
             "Map of bad pixels: those not 0 are replaced from their neighbours.")

const uf_setting uf_setting_table[] = {
    I_REAL("light", "wavelength_nm", light.wavelength_nm, 200, 2000, NONE, "Vacuum wavelength of the excitation."),
    I_CHOICE("light", "polarization", light.polarization, "s|p|mixed", UF_POLARIZATION_MIXED,
             "Polarization of the beam at the interface."),

    I_CHOICE("interface", "geometry", interface.geometry, "objective|prism", UF_GEOMETRY_OBJECTIVE,
             "How the beam reaches the interface."),
    I_ONE_OF("substrate", "interface", "substrate_n", interface.substrate_n, 1, 4,
             "Refractive index of the substrate at wavelength_nm."),
    I_ONE_CHOICE_OF("substrate", "interface", "substrate", interface.substrate, "coverglass|bk7|fused-silica",
                    "Name of the substrate, instead of substrate_n: index at wavelength_nm by its dispersion."),
    I_ONE_OF("medium", "interface", "medium_n", interface.medium_n, 1, 2,
             "Refractive index of the medium, which fills the gap, at wavelength_nm."),
    I_ONE_CHOICE_OF("medium", "interface", "medium", interface.medium, "water|culture-medium|pbs",
                    "Name of the medium, instead of medium_n: index at wavelength_nm and temperature_c."),
    I_REAL("interface", "temperature_c", interface.temperature_c, 0, 60, 37,
           "Temperature of a medium given by name."),
    I_REAL("interface", "cell_n", interface.cell_n, 1, 2, 1.37, "Refractive index of the cell."),
    I_REAL("interface", "cell_n_sd", interface.cell_n_sd, 0, 0.2, 0.01, "1 sigma of cell_n."),
    I_REAL("interface", "substrate_n_sd", interface.substrate_n_sd, 0, 0.2, 0, "1 sigma of substrate_n."),
    I_REAL("interface", "medium_n_sd", interface.medium_n_sd, 0, 0.2, 0,
           "1 sigma of medium_n; a medium given by name has at least that of its recipe."),
    I_REAL("interface", "coating_n", interface.coating_n, 1, 4, NONE,
           "Refractive index of a thin coating on the substrate; the gap begins on top of it."),
    I_REAL("interface", "coating_nm", interface.coating_nm, 0, 1000, NONE, "Thickness of that coating."),
    I_ONE_OF("angle", "interface", "angle_deg", interface.angle_deg, 0, 90,
             "Angle of incidence, from the normal, in the medium of index angle_n."),
    I_REAL("interface", "angle_n", interface.angle_n, 1, 4, NONE,
           "Index the angle is quoted in. Default: substrate_n."),
    I_ONE_OF("angle", "interface", "na_effective", interface.na_effective, 1, 4,
             "n sin(angle), the same in every layer; instead of angle_deg."),
    I_ONE_OF("angle", "interface", "depth_nm", interface.depth_nm, 10, 5000,
             "Measured 1/e depth of the intensity in medium_n; instead of angle_deg."),
    I_REAL("interface", "angle_sd_deg", interface.angle_sd_deg, 0, 20, 0, "1 sigma of angle_deg."),
    I_REAL("interface", "na_effective_sd", interface.na_effective_sd, 0, 0.5, 0, "1 sigma of na_effective."),
    I_REAL("interface", "depth_sd_nm", interface.depth_sd_nm, 0, 1000, 0, "1 sigma of depth_nm."),
    I_REAL("interface", "objective_na", interface.objective_na, 0.1, 2, NONE,
           "Numerical aperture of the objective."),

    I_CHOICE("decay", "model", decay.model, "exponential|layered|table", UF_DECAY_EXPONENTIAL,
             "How excitation falls with the gap."),
    I_PATH("decay", "file", decay.file,
           "Measured decay of model = table: CSV with the columns gap_nm,relative, gaps from 0 up."),
    I_REAL("decay", "scattered_fraction", decay.scattered_fraction, 0, 0.9, 0,
           "Share of stray light in the excitation at gap 0, added to any model."),
    I_REAL("decay", "scattered_depth_nm", decay.scattered_depth_nm, 100, 100000, 1200, "1/e depth of the stray light."),

    I_REAL("pixel", "size_um", pixel.size_um, 1e-3, 20, NONE,
           "Side of a pixel in the specimen. Default: from the TIFF's resolution tags."),

    CAMERA("near.camera", UF_NEAR),
    CAMERA("wide.camera", UF_WIDE),
    I_PATH("near.flat", "file", flat[UF_NEAR].file, "Flat field of the near channel, any scale."),
    I_PATH("wide.flat", "file", flat[UF_WIDE].file, "Flat field of the wide channel, any scale."),

    I_REAL("shift", "dx_px", shift.dx_px, -500, 500, 0, "Shift of wide relative to near, to the right."),
    I_REAL("shift", "dy_px", shift.dy_px, -500, 500, 0, "Shift of wide relative to near, downwards."),
    I_CHOICE("shift", "estimate", shift.estimate, "check|yes|no", UF_ESTIMATE_CHECK,
             "Whether each field's own shift is estimated and compared (check), used (yes) or left alone (no)."),

    I_ONE_OF("reference", "reference", "ratio", reference.ratio, 1e-9, 1e9,
             "near / wide ratio measured where the gap is gap_nm; with label = cytosol the near signal there, in counts."),
    I_REAL("reference", "ratio_sd", reference.ratio_sd, 0, 1e9, 0, "1 sigma of ratio."),
    I_REAL("reference", "gap_nm", reference.gap_nm, 0, 1000, 0, "Gap that the reference stands for, measured or assumed."),
    I_REAL("reference", "gap_sd_nm", reference.gap_sd_nm, 0, 1000, 0, "1 sigma of gap_nm."),
    I_CHOICE("reference", "kind", reference.kind, "cell|film", UF_REFERENCE_CELL,
               "What the reference was measured on: a cell, or a labelled film of one layer with medium above it."),
    I_CHOICE("reference", "gap_is", reference.gap_is, "measured|assumed", UF_GAP_MEASURED,
             "Whether gap_nm was measured by other means; with an assumed one gaps are relative."),
    I_ONE_CHOICE_OF("reference", "reference", "from", reference.from, "wells|pooled|cell",
                    "Where an assumed reference comes from, instead of ratio. wells: role reference of the sheet, else control, of each plate and session; pooled: all its fields; cell: each cell by itself; "
                    "the closest hundredth of a cell lies at gap_nm; "
                    "gaps are then relative, and cells that lift as a whole do not show."),
    I_REAL("reference", "exposure_near_ms", reference.exposure_ms[UF_NEAR], 1e-6, 1e9, NONE,
           "Exposure of the reference's near image; see exposure_ms of the cameras."),
    I_REAL("reference", "exposure_wide_ms", reference.exposure_ms[UF_WIDE], 1e-6, 1e9, NONE,
           "Exposure of the reference's wide image."),
    I_WORD("reference", "near_flat_checksum", reference.flat[UF_NEAR],
           "Fingerprint of the near flat the reference was corrected by, or none; a run with another is refused."),
    I_WORD("reference", "wide_flat_checksum", reference.flat[UF_WIDE], "The same of the wide flat."),
    I_REAL("reference", "normalisation_sd", reference.normalisation_sd, 0, 1, 0.05,
           "Cell-to-cell spread (relative) of what the wide image sees beside the ventral membrane."),

    I_REALS("series", "angles_deg", series.angles_deg, 0, 90,
            "Angles of a series, quoted like angle_deg: the near file has one page an angle, in this order. Gaps then come "
            "from the series, without a reference."),
    I_REALS("series", "power", series.power, 1e-6, 1e6,
            "Relative power (times exposure) at each angle of a series. Default: the same at all."),

    A_CHOICE("cells", "label", cells.label, "membrane|cytosol|adhesion-protein", UF_LABEL_MEMBRANE,
             "What carries the dye."),
    A_REAL("cells", "smooth_um", cells.smooth_um, 0, 5, 0.1,
           "Gaussian smoothing (sigma) of the wide image before outlines are drawn."),
    A_REAL("cells", "min_area_um2", cells.min_area_um2, 0, 1e6, 50, "Smaller things are debris, not cells."),
    A_REAL("cells", "max_area_um2", cells.max_area_um2, 1, 1e9, 1e9, "Larger things are not cells either."),
    A_REAL("cells", "split", cells.split, 0, 1, 0.65,
           "How eagerly touching cells are split: 0 never, 1 at the slightest neck."),
    A_CHOICE("cells", "edge_cells", cells.edge_cells, "weight|keep|drop", UF_EDGE_WEIGHT,
             "Cells cut by the image edge: left out while the others are weighted for it (weight), counted like "
             "the others (keep), or left out (drop)."),

    A_REAL("contact", "cutoff_nm", contact.cutoff_nm, 1, 1000, 50, "Contact is where the gap is at most this."),
    A_REAL("contact", "focal_nm", contact.focal_nm, 1, 1000, 25, "Upper end of the focal band."),
    A_REAL("contact", "close_nm", contact.close_nm, 1, 1000, 50, "Upper end of the close band."),
    A_REAL("contact", "detection_sigma", contact.detection_sigma, 1, 20, 3,
           "A signal weaker than this many sigma of its noise gives no gap."),
    A_REAL("contact", "attached_threshold", contact.attached_threshold, 0, 1, 0.1,
           "A cell is attached when its attachment fraction reaches this."),
    A_REAL("contact", "rim_um", contact.rim_um, 0, 100, 2, "Width of the rim."),
    A_REAL("contact", "near_threshold_adu", contact.near_threshold_adu, 0, 1e9, NONE,
           "With label = adhesion-protein: contact is where the near signal is at least this; without it none is reported."),
    A_REAL("contact", "min_patch_um2", contact.min_patch_um2, 0, 1e4, 0.1, "Smaller contact patches are noise."),

    A_REAL("spots", "min_length_um", spots.min_length_um, 0.05, 50, 0.3, "Shorter spots are dropped."),
    A_REAL("spots", "max_length_um", spots.max_length_um, 0.1, 100, 6, "Longer ones are patches, not spots."),
    A_REAL("spots", "contrast_sigma", spots.contrast_sigma, 1, 50, 4,
           "A spot's contrast must reach this many sigma of the gap's noise."),

    A_LATER("compare", "primary", "Primary metrics."),
    A_LATER("compare", "control", "Treatment that the others are compared to."),
    A_LATER("compare", "block", "Column that pairs the arms."),
    A_REAL("compare", "min_cells_per_well", compare.min_cells_per_well, 1, 1e6, 10,
           "Wells with fewer used cells leave per-cell metrics of replicates, never counts."),
    A_LATER("compare", "drop_flags", "Flags whose cells are left out."),

    A_CHOICE("output", "overlay", output.overlay, "yes|flagged|full|no", UF_OVERLAY_YES,
             "Overlay pictures and their outlines: of every field, of flagged fields only, at full size, none."),
    A_CHOICE("output", "maps", output.maps, "yes|no", UF_NO, "Gap and label TIFFs."),
};

const int uf_setting_count = (int)(sizeof uf_setting_table / sizeof uf_setting_table[0]);

_Static_assert(sizeof uf_setting_table / sizeof uf_setting_table[0] <= UF_SETTINGS_LIMIT,
               "UF_SETTINGS_LIMIT must hold every entry of the table");
