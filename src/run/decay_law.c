/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/decay_law.h"

#include <math.h>

#include "io/csv_read.h"

/* What a measured decay must keep to, so that a ratio has one gap and the table's steps hold it: wide of any real one. */
static const double farthest_nm = 20000, closest_nm = 0.1, steepest_per_nm = 0.2, least_fall = 0.1;

static uf_status read_number(const uf_csv_table *table, const char *path, int row, int column, double *value,
                             uf_error *error)
{
    const char *text = uf_csv_cell(table, row, column);
    if (uf_parse_number(text, value))
        return UF_OK;
    return uf_fail(error, UF_INPUT, "%s:%d: '%.60s' is not a number; write it like 0.35", path, table->lines[row],
                   text);
}

/* Row `row` of the file becomes point row - 1. */
static uf_status take_point(const uf_csv_table *table, const char *path, int row, const int *columns, double first,
                            uf_decay_points *points, uf_error *error)
{
    int k = row - 1;
    double gap, relative;
    uf_status status = read_number(table, path, row, columns[0], &gap, error);
    if (status == UF_OK)
        status = read_number(table, path, row, columns[1], &relative, error);
    if (status != UF_OK)
        return status;
    if (k == 0 && gap != 0)
        return uf_fail(error, UF_INPUT, "%s:%d: the first gap is %g nm; the table must begin at 0", path,
                       table->lines[row], gap);
    if (relative <= 0)
        return uf_fail(error, UF_INPUT, "%s:%d: relative is %g; an excitation is above 0", path, table->lines[row],
                       relative);
    if (gap < 0 || gap > farthest_nm)
        return uf_fail(error, UF_INPUT, "%s:%d: gap_nm is %g; expected 0 to %g", path, table->lines[row], gap,
                       farthest_nm);
    points->gap_nm[k] = gap;
    points->ln_relative[k] = k == 0 ? 0 : uf_round_digits(log(relative / first), 12);
    if (k > 0 && gap < points->gap_nm[k - 1] + closest_nm)
        return uf_fail(error, UF_INPUT, "%s:%d: gap_nm must rise from row to row, by at least %g nm", path,
                       table->lines[row], closest_nm);
    if (k > 0 && points->ln_relative[k] >= points->ln_relative[k - 1])
        return uf_fail(error, UF_INPUT, "%s:%d: relative must fall from row to row; smooth what was measured", path,
                       table->lines[row]);
    if (k > 0 &&
        points->ln_relative[k - 1] - points->ln_relative[k] > steepest_per_nm * (gap - points->gap_nm[k - 1]))
        return uf_fail(
            error, UF_INPUT,
            "%s:%d: relative falls as with a depth below %g nm; no evanescent field does: is gap_nm in nm?", path,
            table->lines[row], 1 / steepest_per_nm);
    points->count = row;
    return UF_OK;
}

static uf_status take_table(const uf_csv_table *table, const char *path, uf_decay_points *points, uf_error *error)
{
    const int columns[] = {uf_csv_column(table, "gap_nm"), uf_csv_column(table, "relative")};
    double first = 1;
    if (columns[0] < 0 || columns[1] < 0)
        return uf_fail(error, UF_INPUT, "%s:1: expected the columns gap_nm,relative", path);
    if (table->rows < 3 || table->rows - 1 > UF_DECAY_POINTS)
        return uf_fail(error, UF_INPUT, "%s:1: %d row%s below the header; expected 2 to %d", path, table->rows - 1,
                       table->rows == 2 ? "" : "s", UF_DECAY_POINTS);
    uf_status status = read_number(table, path, 1, columns[1], &first, error);
    for (int row = 1; status == UF_OK && row < table->rows; row++)
        status = take_point(table, path, row, columns, first, points, error);
    if (status == UF_OK && points->ln_relative[points->count - 1] > -least_fall)
        return uf_fail(
            error, UF_INPUT,
            "%s:%d: relative falls by less than a tenth over the whole table: it tells no gap from another", path,
            table->lines[table->rows - 1]);
    return status;
}

uf_status uf_decay_law_make(const uf_settings *s, uf_decay_law *law, uf_error *error)
{
    static const uf_field_model models[] = {[UF_DECAY_EXPONENTIAL] = UF_FIELD_EXPONENTIAL,
                                            [UF_DECAY_LAYERED] = UF_FIELD_LAYERED,
                                            [UF_DECAY_TABLE] = UF_FIELD_TABLE};
    *law = (uf_decay_law){.model = models[s->decay.model],
                          .stray = {s->decay.scattered_fraction, s->decay.scattered_depth_nm}};
    if (law->model != UF_FIELD_TABLE && s->decay.file)
        return uf_fail(error, UF_INPUT, "[decay] file = %s needs model = table; with another model take the line out",
                       s->decay.file);
    if (law->model != UF_FIELD_TABLE)
        return UF_OK;
    if (!s->decay.file)
        return uf_fail(error, UF_INPUT, "model = table needs file = decay.csv in [decay]");
    uf_csv_table table;
    uf_status status = uf_csv_read(&table, s->decay.file, UF_DECAY_FILE_BYTES, error);
    if (status == UF_OK)
        status = take_table(&table, s->decay.file, &law->points, error);
    uf_csv_free(&table);
    return status;
}
