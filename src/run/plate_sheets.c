/* SPDX-License-Identifier: GPL-3.0-or-later */
/* wells/PLATE_WELL.png: all fields of a well, at all times, on one page. */
#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "io/image_decode.h"
#include "report/contact_sheet.h"
#include "report/thumbnail.h"
#include "run/plate_pictures_parts.h"

/* Consecutive rows of one well in the sorted list. */
typedef struct well_page {
    int first, count;
    const char *name;
} well_page;

typedef struct sheets_job {
    plate_pictures *all;
    uf_work work;
    int *rows; /* of the plan, those that have a well, sorted by well */
    int row_count;
    well_page *pages;
    int page_count;
} sheets_job;

/* ---- which pages ----------------------------------------------------------------------------- */

typedef struct sorted_row {
    const uf_sheet_row *row;
    int index;
} sorted_row;

static int same_well(const void *a, const void *b)
{
    static const uf_sheet_column key[] = {UF_SHEET_PLATE, UF_SHEET_WELL, UF_SHEET_SESSION};
    const sorted_row *one = a, *other = b;
    for (size_t k = 0; k < sizeof key / sizeof *key; k++) {
        int order = strcmp(one->row->text[key[k]], other->row->text[key[k]]);
        if (order)
            return order;
    }
    return 0;
}

static int by_well(const void *a, const void *b)
{
    int order = same_well(a, b);
    return order ? order : ((const sorted_row *)a)->index - ((const sorted_row *)b)->index;
}

static uf_status name_page(sheets_job *job, well_page *page, int number, uf_error *error)
{
    const uf_sheet_row *row = job->all->plan->rows[job->rows[page->first]].row;
    const char *plate = row->text[UF_SHEET_PLATE];
    uf_text text = {0};
    uf_text_printf(&text, "%s%s%s", plate, *plate ? "_" : "", row->text[UF_SHEET_WELL]);
    if (plate_has_sessions(job->all, plate))
        uf_text_printf(&text, "_%s", row->text[UF_SHEET_SESSION]);
    if (number > 1)
        uf_text_printf(&text, "_page%d", number);
    page->name = plate_picture_key(&job->work, &text);
    uf_text_free(&text);
    return page->name ? UF_OK : uf_fail_memory(error, "names of pictures");
}

static uf_status cut_into_pages(sheets_job *job, const sorted_row *sorted, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0, number = 1; status == UF_OK && k < job->row_count; number++) {
        well_page *page = &job->pages[job->page_count++];
        page->first = k;
        while (k < job->row_count && k - page->first < UF_CONTACT_TILES &&
               same_well(&sorted[page->first], &sorted[k]) == 0)
            k++;
        page->count = k - page->first;
        status = name_page(job, page, number, error);
        if (k < job->row_count && same_well(&sorted[page->first], &sorted[k]) != 0)
            number = 0;
    }
    return status;
}

static uf_status name_apart(sheets_job *job, uf_error *error)
{
    const char **names;
    uf_status status =
        uf_take(&job->work, (size_t)job->page_count + 1, sizeof *names, "contact sheets", &names, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < job->page_count; k++)
        names[k] = job->pages[k].name;
    status = plate_names_apart(&job->work, names, job->page_count, error);
    for (int k = 0; status == UF_OK && k < job->page_count; k++)
        job->pages[k].name = names[k];
    return status;
}

/* Contact sheets are made where overlays are. */
static int has_sheet(const plate_pictures *all, int index)
{
    const uf_plate_row *r = &all->plan->rows[index];
    return *r->row->text[UF_SHEET_WELL] && all->plan->all.settings[r->settings]->output.overlay != UF_OVERLAY_NO;
}

static uf_status find_pages(sheets_job *job, uf_error *error)
{
    size_t count = (size_t)job->all->plan->sheet.count + 1;
    sorted_row *sorted;
    uf_status status = uf_take(&job->work, count, sizeof *sorted, "contact sheets", &sorted, error);
    if (status == UF_OK)
        status = uf_take(&job->work, count, sizeof *job->rows, "contact sheets", &job->rows, error);
    if (status == UF_OK)
        status = uf_take(&job->work, count, sizeof *job->pages, "contact sheets", &job->pages, error);
    if (status != UF_OK)
        return status;
    for (int k = 0; k < job->all->plan->sheet.count; k++)
        if (has_sheet(job->all, k))
            sorted[job->row_count++] = (sorted_row){job->all->plan->rows[k].row, k};
    qsort(sorted, (size_t)job->row_count, sizeof *sorted, by_well);
    for (int k = 0; k < job->row_count; k++)
        job->rows[k] = sorted[k].index;
    status = cut_into_pages(job, sorted, error);
    return status == UF_OK ? name_apart(job, error) : status;
}

/* ---- one page -------------------------------------------------------------------------------- */

static uf_status keep_words(uf_work *work, const uf_text *text, const char **words, uf_error *error)
{
    char *copy;
    uf_status status = uf_text_check(text, "a contact sheet", error);
    if (status == UF_OK)
        status = uf_take(work, text->length + 1, 1, "a contact sheet", &copy, error);
    if (status != UF_OK)
        return status;
    memcpy(copy, text->bytes ? text->bytes : "", text->length + 1);
    *words = copy;
    return UF_OK;
}

static uf_status put_words(uf_work *work, const uf_plate_record *r, uf_contact_tile *tile, uf_error *error)
{
    uf_text numbers = {0}, flags = {0};
    int used = 0;
    for (int k = 0; k < r->field.cells; k++)
        used += r->cells[k].used;
    if (r->field.status == UF_FIELD_FAILED)
        uf_text_add(&numbers, "failed");
    else if (used < r->field.cells)
        uf_text_printf(&numbers, "%d cells, %d used", r->field.cells, used);
    else
        uf_text_printf(&numbers, "%d cell%s", r->field.cells, r->field.cells == 1 ? "" : "s");
    for (int k = 0; k < UF_FLAG_COUNT; k++)
        if (r->field.flags >> k & 1u)
            uf_text_printf(&flags, "%s%s", flags.length ? ", " : "", uf_flag_word((uf_flag)k));
    uf_status status = keep_words(work, &numbers, &tile->numbers, error);
    if (status == UF_OK)
        status = keep_words(work, &flags, &tile->flags, error);
    uf_text_free(&numbers);
    uf_text_free(&flags);
    return status;
}

/* A picture that is not there any more is told in its place: the rest of the page is worth having. */
static uf_status fetch_thumbnail(sheets_job *job, uf_work *work, int index, uf_contact_tile *tile, uf_error *error)
{
    uf_text name = {0}, png = {0};
    uf_text_printf(&name, "%s.png", job->all->plan->rows[index].key);
    uf_status status = uf_text_check(&name, "file names", error);
    if (status == UF_OK)
        status = uf_output_read(job->all->output, "thumb", name.bytes, &png, error);
    if (status == UF_OK)
        status = uf_decode_indexed_png(work, &png, UF_THUMBNAIL_SIDE, &tile->thumbnail, error);
    if (status == UF_INPUT) {
        tile->thumbnail = (uf_indexed){0};
        tile->why = "its thumbnail is missing or spoilt: plate --fresh makes it anew";
        status = UF_OK;
    }
    uf_text_free(&name);
    uf_text_free(&png);
    return status;
}

static uf_status fill_tile(sheets_job *job, uf_work *work, int index, uf_contact_tile *tile, uf_error *error)
{
    uf_plate_record r;
    int found;
    *tile = (uf_contact_tile){.name = job->all->plan->rows[index].row->field_id, .why = ""};
    uf_status status = uf_plate_record_of(job->all->output, job->all->plan, index, &work->arena, &r, &found, error);
    if (status == UF_OK && !found)
        return uf_fail(error, UF_INPUT, "a record vanished while the pictures were made; run the same command again");
    if (status == UF_OK)
        status = put_words(work, &r, tile, error);
    if (status != UF_OK)
        return status;
    tile->white_adu = r.thumbnail_white_adu;
    if (!isnan(r.thumbnail_white_adu))
        return fetch_thumbnail(job, work, index, tile, error);
    tile->why = r.field.reason ? r.field.reason : "";
    return UF_OK;
}

static void put_title(const sheets_job *job, const well_page *page, uf_text *out)
{
    const uf_sheet_row *row = job->all->plan->rows[job->rows[page->first]].row;
    static const uf_sheet_column parts[] = {UF_SHEET_PLATE, UF_SHEET_WELL, UF_SHEET_TREATMENT, UF_SHEET_DOSE,
                                            UF_SHEET_COATING};
    for (size_t k = 0; k < sizeof parts / sizeof *parts; k++) {
        const char *text = row->text[parts[k]];
        if (!*text)
            continue;
        uf_text_printf(out, "%s%s", !out->length ? "" : k == 1 ? " " : ", ", text);
        if (parts[k] == UF_SHEET_DOSE && *row->text[UF_SHEET_DOSE_UNIT])
            uf_text_printf(out, " %s", row->text[UF_SHEET_DOSE_UNIT]);
    }
    if (row->role != UF_ROLE_SAMPLE)
        uf_text_printf(out, " (%s)", uf_role_words[row->role]);
}

static void put_note(double white_adu, uf_text *out)
{
    uf_text_add(out, "Near image with the outlines of cells; thick frame: flagged.");
    if (isnan(white_adu))
        return;
    uf_text_add(out, " White is ");
    uf_text_number(out, white_adu, 3);
    uf_text_add(
        out,
        " ADU above background in all wells of this plate and session (black: background, greys by square root).");
}

static uf_status draw_page(sheets_job *job, uf_work *work, const well_page *page, uf_error *error)
{
    uf_text title = {0}, note = {0};
    uf_contact_tile *tiles;
    uf_indexed picture;
    double white_adu = job->all->white_adu[job->all->plan->rows[job->rows[page->first]].group];
    uf_status status = uf_take(work, (size_t)page->count, sizeof *tiles, "a contact sheet", &tiles, error);
    for (int k = 0; status == UF_OK && k < page->count; k++)
        status = fill_tile(job, work, job->rows[page->first + k], &tiles[k], error);
    put_title(job, page, &title);
    put_note(white_adu, &note);
    if (status == UF_OK)
        status = uf_text_check(&title, "a contact sheet", error);
    if (status == UF_OK)
        status = uf_text_check(&note, "a contact sheet", error);
    if (status == UF_OK) {
        uf_contact_sheet sheet = {title.bytes, note.bytes, tiles, page->count, white_adu};
        status = uf_contact_sheet_draw(work, &sheet, &picture, NULL, error);
    }
    if (status == UF_OK)
        status = plate_pictures_write(job->all, "wells", page->name, &picture, error);
    uf_text_free(&title);
    uf_text_free(&note);
    return status;
}

static void page_task(void *context, int hand, int index)
{
    sheets_job *job = context;
    uf_work *work = &job->all->works[hand];
    uf_error error;
    if (plate_pictures_failed(job->all))
        return;
    uf_arena_mark mark = uf_arena_now(&work->arena);
    uf_status status = draw_page(job, work, &job->pages[index], &error);
    uf_arena_back(&work->arena, mark);
    if (status != UF_OK)
        plate_pictures_note(job->all, status, &error);
}

uf_status plate_contact_sheets(plate_pictures *all, uf_error *error)
{
    sheets_job job = {.all = all};
    uf_status status = find_pages(&job, error);
    if (status == UF_OK)
        uf_pool_run(all->pool, job.page_count, page_task, &job);
    uf_arena_free(&job.work.arena);
    if (status == UF_OK && all->status != UF_OK && error)
        *error = all->error;
    return status == UF_OK ? all->status : status;
}
