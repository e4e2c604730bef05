/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/columns.h"

#include <math.h>

#define COUNT_OF(array) ((int)(sizeof(array) / sizeof(array)[0]))

/* ---- cells.csv ------------------------------------------------------------------------------- */

#define CELL(column, kind, meaning) {#column, UF_COLUMN_##kind, offsetof(uf_cell, column), meaning}

static const uf_column cell_columns[] = {
    CELL(cell, WHOLE, "Number of the cell in its field, from 1; the number in the overlay and the value in the label image."),
    CELL(x_px, REAL, "Centroid of the cell, pixels from the centre of the left-most column."),
    CELL(y_px, REAL, "Centroid of the cell, pixels from the centre of the top row, downwards."),
    CELL(x_um, REAL, "x_px in micrometres."),
    CELL(y_um, REAL, "y_px in micrometres."),
    CELL(edge, YES_NO, "Whether the image edge cuts the cell."),
    CELL(edge_weight, REAL, "1 / (chance that a cell of this extent lies wholly inside the field): (W H) / ((W - w)(H - h)) with w and h the sides of its bounding box (Miles 1974; Lantuejoul 1980). Empty for cells cut by the edge."),
    CELL(used, YES_NO, "Whether the cell enters summaries and comparisons."),
    CELL(used_reason, TEXT, "Why a cell is not used."),
    CELL(spread_area_um2, REAL, "Projected area inside the outline in the wide image."),
    CELL(perimeter_um, REAL, "Length of the outline by Crofton's formula over four directions."),
    CELL(circularity, REAL, "2 sqrt(pi area) / perimeter (ISO 9276-6): 1 for a disc, less for anything else."),
    CELL(caliper_max_um, REAL, "Largest distance between two parallel lines that touch the outline."),
    CELL(caliper_min_um, REAL, "Smallest distance between two parallel lines that touch the outline."),
    CELL(elongation, REAL, "caliper_max / caliper_min, at least 1."),
    CELL(convex_fill, REAL, "Area divided by the area of the convex hull."),
    CELL(orientation_deg, REAL, "Direction of the long axis of the ellipse with the cell's second moments, degrees counter-clockwise from the x axis as seen, in (-90, 90]."),
    CELL(contact_area_um2, REAL, "Area where the gap is at most the contact cutoff, in patches of at least min_patch_um2. Empty when the cell is too dim to tell."),
    CELL(contact_area_low_um2, REAL, "Lower end of the 95 % interval of contact_area_um2."),
    CELL(contact_area_high_um2, REAL, "Upper end of the 95 % interval of contact_area_um2."),
    CELL(attachment_fraction, REAL, "contact_area_um2 / spread_area_um2."),
    CELL(attachment_fraction_low, REAL, "Lower end of its 95 % interval."),
    CELL(attachment_fraction_high, REAL, "Upper end of its 95 % interval."),
    CELL(contact_area_minus10_um2, REAL, "Contact area with the cutoff 10 nm lower: how much hangs on the cutoff."),
    CELL(contact_area_plus10_um2, REAL, "Contact area with the cutoff 10 nm higher."),
    CELL(band_focal_um2, REAL, "Area with a gap up to focal_nm."),
    CELL(band_close_um2, REAL, "Area with a gap above focal_nm and up to close_nm."),
    CELL(band_far_um2, REAL, "Area with a measurable gap above close_nm."),
    CELL(unresolved_um2, REAL, "Area where the near or the wide signal is too weak for a gap; with the three bands it adds up to the spread area."),
    CELL(contact_patches, COUNT, "Number of separate contact patches (8-connected)."),
    CELL(largest_patch_um2, REAL, "Area of the largest contact patch."),
    CELL(contact_in_rim_fraction, REAL, "Share of the contact area within rim_um of the outline."),
    CELL(rim_area_fraction, REAL, "Share of the spread area within rim_um of the outline: what contact_in_rim_fraction would be if contact lay anywhere."),
    CELL(gap_median_nm, REAL, "Median gap over the cell, unresolved area counted as far. Empty when the median is unresolved."),
    CELL(gap_p05_nm, REAL, "5th percentile of the gap, in the same way."),
    CELL(gap_p25_nm, REAL, "25th percentile of the gap."),
    CELL(gap_p75_nm, REAL, "75th percentile of the gap."),
    CELL(gap_p95_nm, REAL, "95th percentile of the gap."),
    CELL(gap_core_median_nm, REAL, "Median gap without the outer 2 widths (FWHM) of the point spread function."),
    CELL(gap_random_nm, REAL, "1 sigma of the median from camera and photon noise and from the two backgrounds."),
    CELL(gap_systematic_nm, REAL, "1 sigma of the median from depth, reference and normalisation, which shift all cells of a session together (normalisation: cell by cell); of a series, from angles and indices."),
    CELL(gap_limit_nm, REAL, "Largest gap that could be told from none in this cell (detection_sigma times the noise)."),
    CELL(cleft_volume_um3, REAL, "Volume between cell and substrate: gap times area over resolved pixels, a lower bound when flagged unresolved."),
    CELL(near_mean_adu, REAL, "Mean near signal over the cell, background subtracted, flat-fielded. The near image of a series is the page of its smallest angle."),
    CELL(wide_mean_adu, REAL, "Mean wide signal over the cell, background subtracted, flat-fielded."),
    CELL(ratio_mean, REAL, "near_mean_adu / wide_mean_adu."),
    CELL(above_reference_fraction, REAL, "Share of the resolved area that is brighter than the reference ratio allows at gap 0 by more than its noise. Empty for a series."),
    CELL(spot_count, COUNT, "Number of focal spots in the cell."),
    CELL(spots_per_100um2, REAL, "Focal spots per 100 square micrometres of spread area."),
    CELL(spot_area_total_um2, REAL, "Summed area of the focal spots."),
    CELL(spot_area_median_um2, REAL, "Median area of the focal spots."),
    CELL(spot_length_median_um, REAL, "Median length of the focal spots."),
    CELL(spot_alignment, REAL, "How parallel the spots lie: bias-corrected length of the mean doubled-angle vector, 0 random, 1 parallel. Empty below 5 spots."),
    CELL(gap_kind, GAP_KIND, "absolute (measured reference, or a series of angles), relative (assumed reference) or none."),
    CELL(flags, FLAGS, "Words that call for a look; see docs/measurement.md."),
};

/* ---- spots.csv ------------------------------------------------------------------------------- */

#define SPOT(column, kind, meaning) {#column, UF_COLUMN_##kind, offsetof(uf_spot, column), meaning}

static const uf_column spot_columns[] = {
    SPOT(cell, WHOLE, "Cell that the spot lies in."),
    SPOT(spot, WHOLE, "Number of the spot in its cell, from 1, top to bottom."),
    SPOT(x_px, REAL, "Centroid of the spot, weighted by contrast, pixels."),
    SPOT(y_px, REAL, "Centroid of the spot, weighted by contrast, pixels."),
    SPOT(x_um, REAL, "x_px in micrometres."),
    SPOT(y_um, REAL, "y_px in micrometres."),
    SPOT(area_um2, REAL, "Area where the contrast is at least half the spot's largest."),
    SPOT(length_um, REAL, "Long axis of the ellipse with the spot's second moments."),
    SPOT(width_um, REAL, "Short axis of that ellipse."),
    SPOT(orientation_deg, REAL, "Direction of the long axis, degrees counter-clockwise from the x axis as seen, in (-90, 90]."),
    SPOT(gap_nm, REAL, "Smallest gap in the spot, at the scale of the point spread function."),
    SPOT(contrast_nm, REAL, "How much closer the spot is than its surroundings on its less favourable side, in the best direction."),
    SPOT(near_peak_adu, REAL, "Largest near signal in the spot, background subtracted."),
    SPOT(rim_distance_um, REAL, "Distance of the spot's centroid from the cell's outline."),
};

/* ---- fields.csv ------------------------------------------------------------------------------ */

#define FIELD(column, kind, meaning) {#column, UF_COLUMN_##kind, offsetof(uf_field, column), meaning}

static const uf_column field_columns[] = {
    FIELD(status, STATE, "ok, flagged (look before you trust it) or failed (no numbers)."),
    FIELD(reason, TEXT, "Why a field failed."),
    FIELD(cells, WHOLE, "Cells found."),
    FIELD(cells_counted, WHOLE, "Cells for densities: those that touch the top or the left edge are not counted (two-edge rule)."),
    FIELD(field_area_mm2, REAL, "Area of the field that both images cover."),
    FIELD(cells_per_mm2, REAL, "cells_counted / field_area_mm2."),
    FIELD(contact_um2_per_mm2, REAL, "Contact area of all cells, edge cells included, per square millimetre of field."),
    FIELD(spots, WHOLE, "Focal spots in all cells."),
    FIELD(shift_dx_px, REAL, "Shift of the wide image relative to the near image that was found or set, to the right."),
    FIELD(shift_dy_px, REAL, "The same, downwards."),
    FIELD(shift_score, REAL, "How clearly the shift was found: height of the correlation peak over the highest elsewhere, 1 is no better than chance. Empty when not estimated."),
    FIELD(near_background_adu, REAL, "Level of the near image where there are no cells, offset subtracted, flat-fielded."),
    FIELD(wide_background_adu, REAL, "The same for the wide image."),
    FIELD(near_noise_adu, REAL, "1 sigma noise of one near pixel at the background level."),
    FIELD(wide_noise_adu, REAL, "The same for the wide image."),
    FIELD(near_saturated_fraction, REAL, "Share of near pixels at full scale."),
    FIELD(wide_saturated_fraction, REAL, "Share of wide pixels at full scale."),
    FIELD(near_focus, REAL, "Sharpness of the near image inside cells, 0 (blurred) to 1; about 0.6 in focus."),
    FIELD(wide_focus, REAL, "The same of the wide image; about 0.45 in focus."),
    FIELD(near_unevenness, REAL, "Slope and bow of the near background: its change over the field, relative to its level; 0 when none can be told. Taken out."),
    FIELD(wide_unevenness, REAL, "The same of the wide background."),
    FIELD(reference_ratio, REAL, "near / wide ratio that stands for gap 0 in this field. Empty for a series, which needs none."),
    FIELD(depth_nm, REAL, "1/e depth of the evanescent intensity in the medium; of a series, at its smallest angle."),
    FIELD(pedestal_fraction, REAL, "Blurred light of the cells under the near image, as a share of the wide image; 0 when none can be told. Taken out."),
    FIELD(haze_fraction, REAL, "Blurred light of the cells in the wide image, as a share of their own; 0 when none can be told. Taken out."),
    FIELD(series_chi_square, REAL, "Median over resolved pixels of the reduced chi-square of a series' fit: somewhat below 1 where the pages obey the field in force. Empty without a series, and for one of two angles."),
    FIELD(flags, FLAGS, "Words that call for a look."),
};

const uf_table uf_table_cells = {"cells", "One row a cell.", cell_columns, COUNT_OF(cell_columns)};
const uf_table uf_table_spots = {"spots", "One row a focal spot.", spot_columns, COUNT_OF(spot_columns)};
const uf_table uf_table_fields = {"fields", "One row a field, failed ones too.", field_columns,
                                  COUNT_OF(field_columns)};

const uf_table *const uf_tables[] = {&uf_table_cells, &uf_table_spots, &uf_table_fields};
const int uf_table_count = COUNT_OF(uf_tables);

/* ---- values ---------------------------------------------------------------------------------- */

/* Six significant digits: a tenth of the error of the best of these numbers, and the same everywhere. */
enum { TABLE_DIGITS = 6 };

/* What a flag says in a table, and what it asks for where there is room for a sentence. */
static const struct {
    const char *word, *advice;
} flags[UF_FLAG_COUNT] = {
    [UF_FLAG_EDGE] = {"edge", "cut by the image edge"},
    [UF_FLAG_SATURATED] = {"saturated", "pixels at full scale, where gaps are bounds; expose less"},
    [UF_FLAG_TOO_DIM] = {"too_dim", "the detection limit lies below the contact cutoff; expose longer"},
    [UF_FLAG_TOUCHING] = {"touching", "shares an outline with another cell"},
    [UF_FLAG_UNRESOLVED] = {"unresolved", "more than a quarter has no measurable gap"},
    [UF_FLAG_EMPTY] = {"empty", "no cells found; look at the wide image, and at min_area_um2"},
    [UF_FLAG_SHIFT_UNSURE] = {"shift_unsure", "the shift between the images cannot be told, and was not applied"},
    [UF_FLAG_SHIFT_DIFFERS] = {"shift_differs", "this field's shift is not the bench's; calibrate it again"},
    [UF_FLAG_DISPLAY_SCALED] = {"display_scaled", "looks contrast-stretched to 8 bits, and ratios mean nothing; save raw counts"},
    [UF_FLAG_LAYERED_EFFECT] = {"layered_effect", "an exponential misreads the cutoff by over 3 nm; use model = layered or a steeper angle"},
    [UF_FLAG_OUT_OF_FOCUS] = {"out_of_focus", "blurred; look before you use it"},
    [UF_FLAG_UNEVEN] = {"uneven", "the background slopes; check light and flats"},
    [UF_FLAG_CROWDED] = {"crowded", "hardly any free background"},
    [UF_FLAG_LOW_SIGNAL] = {"low_signal", "cells are weaker than ten times their noise"},
    [UF_FLAG_NEAR_TOO_BRIGHT] = {"near_too_bright", "near is brighter than the reference allows at gap 0; check [reference], exposures and flats"},
    [UF_FLAG_CHANNELS_SWAPPED] = {"channels_swapped", "near looks like a wide image; were the two files swapped?"},
    [UF_FLAG_MOVED] = {"moved", "the cell moved between the two images"},
    [UF_FLAG_CLIPPED] = {"clipped", "counts cut off at 0; raise the camera's offset"},
    [UF_FLAG_NOT_REFLECTED] = {"not_reflected",
                               "n sin(angle) is not above cell_n: light runs on into cells and gaps mean nothing; a steeper angle"},
    [UF_FLAG_SERIES_MISFIT] = {"series_misfit", "the pages do not obey the field in force; check angles, indices and power"},
};

static const char *const gap_kind_words[] = {"none", "relative", "absolute"};
static const char *const state_words[] = {"ok", "flagged", "failed"};

const char *uf_flag_word(uf_flag flag)
{
    return flags[flag].word;
}

const char *uf_flag_advice(uf_flag flag)
{
    return flags[flag].advice;
}

static void put_flags(uf_text *out, uf_flags set)
{
    const char *before = "";
    for (int k = 0; k < UF_FLAG_COUNT; k++)
        if (set >> k & 1u) {
            uf_text_add(out, before);
            uf_text_add(out, flags[k].word);
            before = ";";
        }
}

void uf_column_value(uf_text *out, const uf_column *column, const void *row)
{
    const char *member = (const char *)row + column->offset;
    switch (column->kind) {
    case UF_COLUMN_REAL:
        uf_text_number(out, *(const double *)(const void *)member, TABLE_DIGITS);
        break;
    case UF_COLUMN_COUNT:
        uf_text_number(out, *(const double *)(const void *)member, 15);
        break;
    case UF_COLUMN_WHOLE:
        uf_text_printf(out, "%d", *(const int *)(const void *)member);
        break;
    case UF_COLUMN_YES_NO:
        uf_text_add(out, *(const int *)(const void *)member ? "yes" : "no");
        break;
    case UF_COLUMN_TEXT: {
        const char *text = *(const char *const *)(const void *)member;
        uf_text_add(out, text ? text : "");
        break;
    }
    case UF_COLUMN_FLAGS:
        put_flags(out, *(const uf_flags *)(const void *)member);
        break;
    case UF_COLUMN_GAP_KIND:
        uf_text_add(out, gap_kind_words[*(const uf_gap_kind *)(const void *)member]);
        break;
    case UF_COLUMN_STATE:
        uf_text_add(out, state_words[*(const uf_field_state *)(const void *)member]);
        break;
    }
}

/* ---- the page -------------------------------------------------------------------------------- */

static void put_table(uf_text *out, const uf_table *table)
{
    uf_text_printf(out, "## %s.csv\n\n%s\n\n| column | meaning |\n| --- | --- |\n", table->name, table->meaning);
    uf_text_add(out, "| `field_id` | The field: plate/well/field/time where a sheet names them, else the path of the near image. |\n");
    for (int k = 0; k < table->count; k++)
        uf_text_printf(out, "| `%s` | %s |\n", table->columns[k].name, table->columns[k].meaning);
    uf_text_add(out, "\n");
}

void uf_columns_page(uf_text *out)
{
    uf_text_add(out, "# Columns\n\n"
                     "Made by `make docs` from `src/record/columns.c`; change it there.\n\n"
                     "Every table is CSV by RFC 4180 with a header row and a `.` decimal point whatever the "
                     "locale. A value that does not exist is an empty cell, never 0. Pixel (0,0) is the centre "
                     "of the top left pixel.\n\n");
    for (int k = 0; k < uf_table_count; k++)
        put_table(out, uf_tables[k]);
}
