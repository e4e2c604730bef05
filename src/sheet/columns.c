/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/columns.h"

#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "record/columns.h"

const uf_sheet_column_facts uf_sheet_columns[UF_SHEET_COLUMNS] = {
    [UF_SHEET_NEAR] = {"near", UF_SHEET_PATH, "File of the near (evanescent) image. Required."},
    [UF_SHEET_WIDE] = {"wide", UF_SHEET_PATH,
                       "File of the wide image; may be empty for adhesion-protein labels only."},
    [UF_SHEET_PLATE] = {"plate", UF_SHEET_WORD, "Name of the plate; every plate of an experiment has its own."},
    [UF_SHEET_WELL] = {"well", UF_SHEET_NAME, "Well, A1 or A01; with vessel = coverslip or dish any name."},
    [UF_SHEET_FIELD] = {"field", UF_SHEET_WORD, "Field in its well, a number or a word."},
    [UF_SHEET_VESSEL] = {"vessel", UF_SHEET_WORD,
                         "Wells of the plate (6, 12, 24, 48, 96, 384, 1536), or coverslip, or dish."},
    [UF_SHEET_TREATMENT] = {"treatment", UF_SHEET_WORD,
                            "What was given to the cells; the same word for the same thing."},
    [UF_SHEET_DOSE] = {"dose", UF_SHEET_AMOUNT, "How much of it, a number, or a number and its unit."},
    [UF_SHEET_DOSE_UNIT] = {"dose_unit", UF_SHEET_WORD,
                            "Unit of the dose; one within a treatment, others are converted or refused."},
    [UF_SHEET_COATING] = {"coating", UF_SHEET_WORD, "What the substrate is coated with."},
    [UF_SHEET_REPLICATE] = {"replicate", UF_SHEET_WORD,
                            "The independent repeat: another day, passage or donor, not a parallel well."},
    [UF_SHEET_SESSION] = {"session", UF_SHEET_WORD,
                          "The sitting at the bench: one set of flats, one reference, one optics."},
    [UF_SHEET_INSTRUMENT] = {"instrument", UF_SHEET_PATH, "Instrument file of this row, where sessions differ."},
    [UF_SHEET_ROLE] = {"role", UF_SHEET_CHOICE, "sample (also when empty), control, positive, reference or blank."},
    [UF_SHEET_TIME_MIN] = {"time_min", UF_SHEET_NUMBER, "Minutes from the experiment's start, of time series."},
    [UF_SHEET_ACQUIRED] = {"acquired", UF_SHEET_TIME, "When the field was taken, ISO 8601: 2030-05-06T14:30:00."},
    [UF_SHEET_POSITION] = {"position", UF_SHEET_WORD, "Number of the stage position."},
    [UF_SHEET_NEAR_PAGE] = {"near_page", UF_SHEET_PAGE,
                            "Page of the near image in its file, from 1 (also when empty); of a series the first."},
    [UF_SHEET_WIDE_PAGE] = {"wide_page", UF_SHEET_PAGE, "Page of the wide image in its file, from 1."},
    [UF_SHEET_NUCLEI] = {"nuclei", UF_SHEET_PATH, "File of an image of nuclei, to guide the outlines."},
    [UF_SHEET_MASK] = {"mask", UF_SHEET_PATH, "File of a label image that takes the place of the outlines."},
    [UF_SHEET_EXPOSURE_NEAR_MS] = {"exposure_near_ms", UF_SHEET_NUMBER, "Exposure of the near image."},
    [UF_SHEET_EXPOSURE_WIDE_MS] = {"exposure_wide_ms", UF_SHEET_NUMBER, "Exposure of the wide image."},
};

const char *const uf_role_words[UF_ROLES] = {"sample", "control", "positive", "reference", "blank"};

int uf_role_parse(const char *word)
{
    for (int k = 0; k < UF_ROLES; k++)
        if (strcasecmp(word, uf_role_words[k]) == 0)
            return k;
    return -1;
}

int uf_sheet_column_find(const char *name)
{
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        if (strcmp(name, uf_sheet_columns[k].name) == 0)
            return k;
    return -1;
}

int uf_sheet_column_nearest(const char *name)
{
    char plain[64];
    size_t length = strnlen(name, sizeof plain - 1);
    int nearest = -1, least = 3;
    for (size_t k = 0; k < length; k++) {
        char c = name[k] >= 'A' && name[k] <= 'Z' ? (char)(name[k] - 'A' + 'a') : name[k];
        plain[k] = c == ' ' || c == '-' ? '_' : c;
    }
    plain[length] = '\0';
    for (int k = 0; k < UF_SHEET_COLUMNS; k++) {
        int distance = uf_edit_distance(plain, uf_sheet_columns[k].name);
        /* Two letters of a short word make it another word. */
        if (distance < least && distance <= (int)strlen(uf_sheet_columns[k].name) / 4 + (distance == 0)) {
            least = distance;
            nearest = k;
        }
    }
    return nearest;
}

const char *uf_result_table_of(const char *name)
{
    /* Result tables repeat the sheet's columns; those are no results. */
    if (uf_sheet_column_find(name) >= 0)
        return NULL;
    for (int k = 0; k < uf_table_count; k++)
        for (int i = 0; i < uf_tables[k]->count; i++)
            if (strcmp(name, uf_tables[k]->columns[i].name) == 0)
                return uf_tables[k]->name;
    return strcmp(name, "field_id") == 0 ? "cells" : NULL;
}

void uf_sheet_columns_page(uf_text *out)
{
    uf_text_add(out,
                "# Columns of a sheet\n\n"
                "Made by `make docs` from `src/sheet/columns.c`; change it there.\n\n"
                "CSV with a header row, columns in any order. Only `near` and `wide` have to be there; other columns "
                "than these are carried through to the results, unless a result has that name.\n\n"
                "| column | meaning |\n| --- | --- |\n");
    for (int k = 0; k < UF_SHEET_COLUMNS; k++)
        uf_text_printf(out, "| `%s` | %s |\n", uf_sheet_columns[k].name, uf_sheet_columns[k].meaning);
}
