/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "record/pack.h"

#include <string.h>

/* ---- out ----------------------------------------------------------------------------------------- */

void uf_pack_count(uf_text *out, uint64_t value)
{
    unsigned char bytes[8];
    for (int k = 0; k < 8; k++)
        bytes[k] = (unsigned char)(value >> (8 * k));
    uf_text_bytes(out, bytes, sizeof bytes);
}

void uf_pack_real(uf_text *out, double value)
{
    uint64_t bits;
    memcpy(&bits, &value, sizeof bits);
    uf_pack_count(out, bits);
}

/* The length plus one comes first, 0 for NULL. */
void uf_pack_text(uf_text *out, const char *text)
{
    uf_pack_count(out, text ? strlen(text) + 1 : 0);
    if (text)
        uf_text_bytes(out, text, strlen(text));
}

void uf_pack_row(uf_text *out, const uf_table *table, const void *row)
{
    for (int k = 0; k < table->count; k++) {
        const void *member = (const char *)row + table->columns[k].offset;
        switch (table->columns[k].kind) {
        case UF_COLUMN_REAL:
        case UF_COLUMN_COUNT:
            uf_pack_real(out, *(const double *)member);
            break;
        case UF_COLUMN_TEXT:
            uf_pack_text(out, *(const char *const *)member);
            break;
        case UF_COLUMN_WHOLE:
        case UF_COLUMN_YES_NO:
            uf_pack_count(out, (uint64_t)(int64_t) * (const int *)member);
            break;
        case UF_COLUMN_FLAGS:
            uf_pack_count(out, *(const uf_flags *)member);
            break;
        case UF_COLUMN_GAP_KIND:
            uf_pack_count(out, (uint64_t) * (const uf_gap_kind *)member);
            break;
        case UF_COLUMN_STATE:
            uf_pack_count(out, (uint64_t) * (const uf_field_state *)member);
            break;
        }
    }
}

/* Most bins are empty: only the others are kept, each with its number. */
void uf_pack_cell(uf_text *out, const uf_cell *cell)
{
    uint64_t filled = 0;
    uf_pack_row(out, &uf_table_cells, cell);
    for (int k = 0; k < UF_GAP_BINS; k++)
        filled += cell->gap_histogram[k] > 0;
    uf_pack_count(out, filled);
    for (int k = 0; k < UF_GAP_BINS; k++)
        if (cell->gap_histogram[k])
            uf_pack_count(out, (uint64_t)k << 32 | cell->gap_histogram[k]);
}

/* ---- in ------------------------------------------------------------------------------------------ */

uint64_t uf_unpack_count(uf_packed *in)
{
    uint64_t value = 0;
    if (in->broken || in->end - in->at < 8) {
        in->broken = 1;
        return 0;
    }
    for (int k = 0; k < 8; k++)
        value |= (uint64_t)(unsigned char)in->at[k] << (8 * k);
    in->at += 8;
    return value;
}

double uf_unpack_real(uf_packed *in)
{
    uint64_t bits = uf_unpack_count(in);
    double value;
    memcpy(&value, &bits, sizeof value);
    return value;
}

const char *uf_unpack_text(uf_packed *in)
{
    uint64_t length = uf_unpack_count(in);
    if (length == 0 || in->broken)
        return NULL;
    length--;
    char *text = length <= (uint64_t)(in->end - in->at) ? uf_arena_take(in->arena, (size_t)length + 1) : NULL;
    if (!text) {
        in->broken = 1;
        return NULL;
    }
    memcpy(text, in->at, (size_t)length);
    text[length] = '\0';
    in->at += length;
    return text;
}

void uf_unpack_row(uf_packed *in, const uf_table *table, void *row)
{
    for (int k = 0; k < table->count; k++) {
        void *member = (char *)row + table->columns[k].offset;
        switch (table->columns[k].kind) {
        case UF_COLUMN_REAL:
        case UF_COLUMN_COUNT:
            *(double *)member = uf_unpack_real(in);
            break;
        case UF_COLUMN_TEXT:
            *(const char **)member = uf_unpack_text(in);
            break;
        case UF_COLUMN_WHOLE:
        case UF_COLUMN_YES_NO:
            *(int *)member = (int)(int64_t)uf_unpack_count(in);
            break;
        case UF_COLUMN_FLAGS:
            *(uf_flags *)member = (uf_flags)uf_unpack_count(in);
            break;
        case UF_COLUMN_GAP_KIND: {
            uint64_t kind = uf_unpack_count(in);
            in->broken |= kind > UF_GAP_ABSOLUTE;
            *(uf_gap_kind *)member = in->broken ? UF_GAP_NONE : (uf_gap_kind)kind;
            break;
        }
        case UF_COLUMN_STATE: {
            uint64_t state = uf_unpack_count(in);
            in->broken |= state > UF_FIELD_FAILED;
            *(uf_field_state *)member = in->broken ? UF_FIELD_FAILED : (uf_field_state)state;
            break;
        }
        }
    }
}

void uf_unpack_cell(uf_packed *in, uf_cell *cell)
{
    uf_unpack_row(in, &uf_table_cells, cell);
    memset(cell->gap_histogram, 0, sizeof cell->gap_histogram);
    for (uint64_t filled = uf_unpack_count(in); filled > 0 && !in->broken; filled--) {
        uint64_t bin = uf_unpack_count(in);
        if (bin >> 32 >= UF_GAP_BINS)
            in->broken = 1;
        else
            cell->gap_histogram[bin >> 32] = (uint32_t)bin;
    }
}
