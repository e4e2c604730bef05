/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "run/plate_record.h"

#include <string.h>

static const char magic[] = "underfoot record 2\n";
enum { MAGIC_BYTES = sizeof magic - 1, CHECKSUM_BYTES = 8 };

/* ---- out ------------------------------------------------------------------------------------- */

static void put_inputs(uf_text *out, const uf_plate_record *r)
{
    uf_pack_count(out, (uint64_t)r->input_count);
    for (int k = 0; k < r->input_count; k++) {
        const uf_record_input *in = &r->inputs[k];
        uf_pack_text(out, in->role);
        uf_pack_text(out, in->path);
        uf_pack_count(out, (uint64_t)in->facts.bytes);
        uf_pack_count(out, (uint64_t)in->facts.changed_ns);
        uf_pack_count(out, in->fingerprint);
    }
}

void uf_plate_record_put(uf_text *out, const char *plan_hash, const char *field_id, const uf_plate_record *r)
{
    size_t from = out->length;
    uf_text_bytes(out, magic, MAGIC_BYTES);
    uf_pack_text(out, plan_hash);
    uf_pack_text(out, field_id);
    uf_pack_row(out, &uf_table_fields, &r->field);
    uf_pack_real(out, r->depth_nm);
    uf_pack_real(out, r->contact_cutoff_nm);
    uf_pack_text(out, r->warnings);
    uf_pack_text(out, r->overlay);
    uf_pack_real(out, r->thumbnail_white_adu);
    put_inputs(out, r);
    uf_pack_count(out, (uint64_t)r->field.cells);
    for (int k = 0; k < r->field.cells; k++)
        uf_pack_cell(out, &r->cells[k]);
    uf_pack_count(out, (uint64_t)r->field.spots);
    for (int k = 0; k < r->field.spots; k++)
        uf_pack_row(out, &uf_table_spots, &r->spots[k]);
    if (!out->failed)
        uf_pack_count(out, uf_fingerprint(out->bytes + from, out->length - from));
}

/* ---- in -------------------------------------------------------------------------------------- */

static int is_whole(const uf_text *bytes)
{
    if (bytes->length < MAGIC_BYTES + CHECKSUM_BYTES || memcmp(bytes->bytes, magic, MAGIC_BYTES) != 0)
        return 0;
    size_t body = bytes->length - CHECKSUM_BYTES;
    uf_packed in = {bytes->bytes + body, bytes->bytes + bytes->length, NULL, 0};
    return uf_unpack_count(&in) == uf_fingerprint(bytes->bytes, body);
}

static int is_same(const char *a, const char *b)
{
    return a && b && strcmp(a, b) == 0;
}

/* Room for `count` things of which each takes at least `least` bytes of what is left. */
static void *take(uf_packed *in, uint64_t count, size_t size, size_t least)
{
    void *memory = NULL;
    if (!in->broken && count <= (uint64_t)(in->end - in->at) / least)
        memory = uf_arena_take(in->arena, (size_t)(count + 1) * size);
    if (!memory)
        in->broken = 1;
    else
        memset(memory, 0, (size_t)(count + 1) * size);
    return memory;
}

static void take_inputs(uf_packed *in, uf_plate_record *r)
{
    uint64_t count = uf_unpack_count(in);
    r->inputs = take(in, count, sizeof *r->inputs, 5 * 8);
    for (uint64_t k = 0; k < count && !in->broken; k++) {
        uf_record_input *input = &r->inputs[k];
        input->role = uf_unpack_text(in);
        input->path = uf_unpack_text(in);
        input->facts.bytes = (int64_t)uf_unpack_count(in);
        input->facts.changed_ns = (int64_t)uf_unpack_count(in);
        input->fingerprint = uf_unpack_count(in);
        in->broken |= !input->role || !input->path;
    }
    r->input_count = in->broken ? 0 : (int)count;
}

static void take_rows(uf_packed *in, uf_plate_record *r)
{
    uint64_t cells = uf_unpack_count(in);
    r->cells = take(in, cells, sizeof *r->cells, (size_t)uf_table_cells.count * 8);
    for (uint64_t k = 0; k < cells && !in->broken; k++)
        uf_unpack_cell(in, &r->cells[k]);
    uint64_t spots = uf_unpack_count(in);
    r->spots = take(in, spots, sizeof *r->spots, (size_t)uf_table_spots.count * 8);
    for (uint64_t k = 0; k < spots && !in->broken; k++)
        uf_unpack_row(in, &uf_table_spots, &r->spots[k]);
    in->broken |= cells != (uint64_t)r->field.cells || spots != (uint64_t)r->field.spots;
}

int uf_plate_record_take(const uf_text *bytes, const char *plan_hash, const char *field_id, uf_arena *arena,
                         uf_plate_record *r)
{
    *r = (uf_plate_record){0};
    if (!is_whole(bytes))
        return 0;
    uf_packed in = {bytes->bytes + MAGIC_BYTES, bytes->bytes + bytes->length - CHECKSUM_BYTES, arena, 0};
    if (!is_same(uf_unpack_text(&in), plan_hash) || !is_same(uf_unpack_text(&in), field_id))
        return 0;
    uf_unpack_row(&in, &uf_table_fields, &r->field);
    r->depth_nm = uf_unpack_real(&in);
    r->contact_cutoff_nm = uf_unpack_real(&in);
    r->warnings = uf_unpack_text(&in);
    r->overlay = uf_unpack_text(&in);
    r->thumbnail_white_adu = uf_unpack_real(&in);
    take_inputs(&in, r);
    take_rows(&in, r);
    return !in.broken && in.at == in.end;
}

int uf_plate_record_is_current(const uf_plate_record *r)
{
    for (int k = 0; k < r->input_count; k++) {
        uf_input_facts now = uf_input_facts_of(r->inputs[k].path);
        if (now.bytes != r->inputs[k].facts.bytes ||
            (now.bytes >= 0 && now.changed_ns != r->inputs[k].facts.changed_ns))
            return 0;
    }
    return 1;
}
