/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * The text of the sheet is checked as it is read (sheet/cells.c), the experiment by sheet/checks.c; here are the files.
 * Each is looked at once, however many rows name it.
 */
#include "run/sheet_check.h"

#include <math.h>
#include <stdlib.h>
#include <string.h>

#include "base/work.h"
#include "io/folder.h"
#include "io/image_file.h"
#include "run/sheet_read.h"
#include "sheet/checks.h"

/* A page of a file that the sheet names. */
typedef struct image {
    const char *path;
    int page; /* from 1 */
    const uf_sheet_row *row;
    uf_sheet_column column;
    int first; /* index of the first image of the same path and page, which holds what was found */
    uf_status status;
    bool missing;
    uf_image_info info;
    char text[UF_ERROR_TEXT];
} image;

/* An instrument file that rows name. */
typedef struct bench {
    const char *path;
    uf_settings *settings; /* NULL when it cannot be read */
} bench;

typedef struct check_job {
    const uf_sheet_check_request *request;
    uf_faults *faults;
    uf_sheet sheet;
    image *images; /* sorted by path and page */
    int image_count;
    int *files; /* index of each file's first image, and the end */
    int file_count;
    bench *benches; /* sorted by path */
    int bench_count;
} check_job;

static uf_place place_of(const check_job *job, const uf_sheet_row *row, uf_sheet_column column)
{
    return (uf_place){job->sheet.path, row->line, uf_sheet_columns[column].name};
}

/* ---- instrument files ------------------------------------------------------------------------ */

static int by_bench(const void *a, const void *b)
{
    return strcmp(((const bench *)a)->path, ((const bench *)b)->path);
}

static const bench *bench_of(const check_job *job, const uf_sheet_row *row)
{
    bench wanted = {row->instrument_path, NULL};
    if (!row->instrument_path || !job->bench_count)
        return NULL;
    return bsearch(&wanted, job->benches, (size_t)job->bench_count, sizeof *job->benches, by_bench);
}

static const uf_settings *settings_of(const check_job *job, const uf_sheet_row *row)
{
    const bench *found = bench_of(job, row);
    return found && found->settings ? found->settings : job->request->settings;
}

/* Reads one and says what is wrong with it once, at its first row. */
static uf_status read_bench(check_job *job, bench *b, const uf_sheet_row *row, uf_error *error)
{
    uf_error why = {0};
    uf_status status = uf_settings_new(&b->settings, error);
    if (status != UF_OK)
        return status;
    if (uf_settings_read(b->settings, b->path, UF_INSTRUMENT_FILE, &why) != UF_OK) {
        uf_fault_add(job->faults, UF_FAULT, "instrument", place_of(job, row, UF_SHEET_INSTRUMENT), "%.600s",
                     why.text);
        uf_settings_free(&b->settings);
    }
    return UF_OK;
}

static uf_status read_benches(check_job *job, uf_error *error)
{
    uf_status status = UF_OK;
    job->benches = calloc((size_t)job->sheet.count + 1, sizeof *job->benches);
    if (!job->benches)
        return uf_fail_memory(error, "the checks of a sheet");
    for (int k = 0; status == UF_OK && k < job->sheet.count; k++) {
        const uf_sheet_row *row = &job->sheet.rows[k];
        if (!row->instrument_path || bench_of(job, row))
            continue;
        bench *b = &job->benches[job->bench_count];
        b->path = row->instrument_path;
        status = read_bench(job, b, row, error);
        job->bench_count++;
        qsort(job->benches, (size_t)job->bench_count, sizeof *job->benches, by_bench);
    }
    return status;
}

/* ---- looking at images ----------------------------------------------------------------------- */

static int by_page(const void *a, const void *b)
{
    const image *one = a, *other = b;
    int order = strcmp(one->path, other->path);
    order = order ? order : one->page - other->page;
    order = order ? order : one->row->line - other->row->line;
    return order ? order : (int)one->column - (int)other->column;
}

static void add_image(check_job *job, const uf_sheet_row *row, uf_sheet_column column, const char *path, int page)
{
    if (path)
        job->images[job->image_count++] = (image){.path = path, .page = page, .row = row, .column = column};
}

static uf_status list_images(check_job *job, uf_error *error)
{
    enum { MOST_A_ROW = 5 };
    job->images = malloc(((size_t)job->sheet.count * MOST_A_ROW + 1) * sizeof *job->images);
    if (!job->images)
        return uf_fail_memory(error, "the checks of a sheet");
    for (int k = 0; k < job->sheet.count; k++) {
        const uf_sheet_row *row = &job->sheet.rows[k];
        const uf_settings *settings = settings_of(job, row);
        int angles = settings ? settings->series.angles_deg.count : 0;
        add_image(job, row, UF_SHEET_NEAR, row->near_path, row->near_page);
        if (angles > 1)
            add_image(job, row, UF_SHEET_NEAR, row->near_path, row->near_page + angles - 1);
        add_image(job, row, UF_SHEET_WIDE, row->wide_path, row->wide_page);
        add_image(job, row, UF_SHEET_NUCLEI, row->nuclei_path, 1);
        add_image(job, row, UF_SHEET_MASK, row->mask_path, 1);
    }
    qsort(job->images, (size_t)job->image_count, sizeof *job->images, by_page);
    for (int k = 0; k < job->image_count; k++) {
        const image *before = k ? &job->images[k - 1] : NULL;
        bool same = before && strcmp(before->path, job->images[k].path) == 0 && before->page == job->images[k].page;
        job->images[k].first = same ? before->first : k;
    }
    return UF_OK;
}

/* Pages of one file, which lie together: each is looked at once. */
static void look_at_file(void *context, int hand, int index)
{
    check_job *job = context;
    int from = job->files[index], to = job->files[index + 1], count = 0;
    (void)hand;
    uf_page_probe *probes = calloc((size_t)(to - from), sizeof *probes);
    for (int k = from; k < to; k++) {
        job->images[k].status = UF_MEMORY;
        if (probes && job->images[k].first == k)
            probes[count++].page = job->images[k].page - 1;
    }
    if (probes)
        uf_image_probe_pages(job->images[from].path, NULL, probes, count, NULL);
    for (int k = from, p = -1; probes && k < to; k++) {
        image *i = &job->images[k];
        p += i->first == k;
        i->status = probes[p].status;
        i->info = probes[p].info;
        memcpy(i->text, probes[p].error.text, sizeof i->text);
        i->missing = i->status != UF_OK && !uf_path_exists(i->path);
    }
    free(probes);
}

/* Where the images of each file begin, and the end after the last. */
static uf_status list_files(check_job *job, uf_error *error)
{
    job->files = malloc(((size_t)job->image_count + 1) * sizeof *job->files);
    if (!job->files)
        return uf_fail_memory(error, "the checks of a sheet");
    for (int k = 0; k < job->image_count; k++)
        if (k == 0 || strcmp(job->images[k].path, job->images[k - 1].path) != 0)
            job->files[job->file_count++] = k;
    job->files[job->file_count] = job->image_count;
    return UF_OK;
}

static uf_status look_at_images(check_job *job, uf_error *error)
{
    uf_pool *pool = NULL;
    uf_status status = list_files(job, error);
    if (status == UF_OK)
        status = uf_pool_new(&pool, job->request->threads, error);
    if (status == UF_OK)
        uf_pool_run(pool, job->file_count, look_at_file, job);
    uf_pool_free(&pool);
    for (int k = 0; status == UF_OK && k < job->image_count; k++) {
        const image *i = &job->images[k], *found = &job->images[i->first];
        if (found->status == UF_MEMORY)
            return uf_fail_memory(error, "the header of an image");
        if (found->status != UF_OK)
            uf_fault_add(job->faults, UF_FAULT, found->missing ? "missing_file" : "image",
                         place_of(job, i->row, i->column), "%.900s", found->text);
    }
    return status;
}

/* ---- images against each other --------------------------------------------------------------- */

/* What was found of the row's image; NULL when it cannot be used, or there is none. */
static const uf_image_info *info_of(const check_job *job, const uf_sheet_row *row, uf_sheet_column column)
{
    const char *paths[] = {row->near_path, row->wide_path, row->nuclei_path, row->mask_path};
    const uf_sheet_column columns[] = {UF_SHEET_NEAR, UF_SHEET_WIDE, UF_SHEET_NUCLEI, UF_SHEET_MASK};
    image wanted = {.page = 1, .row = row, .column = column};
    for (size_t k = 0; k < sizeof columns / sizeof columns[0]; k++)
        wanted.path = columns[k] == column ? paths[k] : wanted.path;
    if (!wanted.path)
        return NULL;
    wanted.page = column == UF_SHEET_NEAR ? row->near_page : column == UF_SHEET_WIDE ? row->wide_page : 1;
    const image *found = bsearch(&wanted, job->images, (size_t)job->image_count, sizeof *job->images, by_page);
    const image *first = found ? &job->images[found->first] : NULL;
    return first && first->status == UF_OK ? &first->info : NULL;
}

static void compare_sizes(check_job *job, const uf_sheet_row *row, const uf_image_info *near)
{
    static const uf_sheet_column others[] = {UF_SHEET_WIDE, UF_SHEET_NUCLEI, UF_SHEET_MASK};
    for (size_t k = 0; k < sizeof others / sizeof others[0]; k++) {
        const uf_image_info *other = info_of(job, row, others[k]);
        if (other && (other->width != near->width || other->height != near->height))
            uf_fault_add(job->faults, UF_FAULT, "size", place_of(job, row, others[k]),
                         "is %d x %d pixels, the near image %d x %d; both must show the same field at one size",
                         other->width, other->height, near->width, near->height);
    }
}

static bool same_length(double a, double b)
{
    return (isnan(a) && isnan(b)) || fabs(a - b) <= 1e-3 * fabs(b);
}

/* Rows of one session and instrument share a camera and an objective; the first of them stands for all. */
static bool same_bench(const uf_sheet_row *a, const uf_sheet_row *b)
{
    return strcmp(a->text[UF_SHEET_SESSION], b->text[UF_SHEET_SESSION]) == 0 &&
           strcmp(a->text[UF_SHEET_INSTRUMENT], b->text[UF_SHEET_INSTRUMENT]) == 0;
}

/* The first usable near image of each bench. */
typedef struct standard {
    const uf_sheet_row *row;
    const uf_image_info *info;
} standard;

enum { MOST_STANDARDS = 256 };

static const standard *standard_for(standard *list, int *count, const uf_sheet_row *row, const uf_image_info *info)
{
    for (int k = 0; k < *count; k++)
        if (same_bench(list[k].row, row))
            return &list[k];
    if (*count == MOST_STANDARDS)
        return NULL;
    list[*count] = (standard){row, info};
    return &list[(*count)++];
}

static void compare_to_standard(check_job *job, const uf_sheet_row *row, const uf_image_info *near, const standard *s)
{
    if (near->width != s->info->width || near->height != s->info->height)
        uf_fault_add(job->faults, UF_FAULT, "size", place_of(job, row, UF_SHEET_NEAR),
                     "is %d x %d pixels, line %d of the same session %d x %d; give rows of another camera or binning "
                     "their own "
                     "session and instrument",
                     near->width, near->height, s->row->line, s->info->width, s->info->height);
    if (!same_length(near->pixel_size_x_um, s->info->pixel_size_x_um))
        uf_fault_add(
            job->faults, UF_FAULT, "pixel_size", place_of(job, row, UF_SHEET_NEAR),
            "its pixels are %.6g um, those of line %d of the same session %.6g um; give rows of another objective "
            "their own session and instrument",
            near->pixel_size_x_um, s->row->line, s->info->pixel_size_x_um);
}

static void check_pixel_size(check_job *job, const uf_sheet_row *row, const uf_image_info *near, int *without,
                             const uf_sheet_row **first)
{
    const uf_settings *settings = settings_of(job, row);
    double said = settings ? settings->pixel.size_um : (double)NAN, held = near->pixel_size_x_um;
    if (isnan(said) && isnan(held) && !(*without)++)
        *first = row;
    if (!isnan(said) && !isnan(held) && fabs(said - held) > 0.02 * said)
        uf_fault_add(job->faults, UF_WARNING, "pixel_size", place_of(job, row, UF_SHEET_NEAR),
                     "its pixels are %.6g um by the file, %.6g um by the instrument file, which is taken", held,
                     said);
    if (!same_length(near->pixel_size_x_um, near->pixel_size_y_um))
        uf_fault_add(job->faults, UF_FAULT, "pixel_size", place_of(job, row, UF_SHEET_NEAR),
                     "its pixels are %.6g um wide and %.6g um high; expected squares: export it again",
                     near->pixel_size_x_um, near->pixel_size_y_um);
}

static void check_images(check_job *job)
{
    standard standards[MOST_STANDARDS];
    int count = 0, without = 0;
    const uf_sheet_row *first = NULL;
    for (int k = 0; k < job->sheet.count; k++) {
        const uf_sheet_row *row = &job->sheet.rows[k];
        const uf_image_info *near = info_of(job, row, UF_SHEET_NEAR);
        if (!near)
            continue;
        const standard *s = standard_for(standards, &count, row, near);
        compare_sizes(job, row, near);
        if (s && s->row != row)
            compare_to_standard(job, row, near, s);
        check_pixel_size(job, row, near, &without, &first);
    }
    for (int k = 1; k < count; k++)
        if (standards[k].info->width != standards[0].info->width ||
            standards[k].info->height != standards[0].info->height)
            uf_fault_add(job->faults, UF_WARNING, "size", place_of(job, standards[k].row, UF_SHEET_NEAR),
                         "is %d x %d pixels, another session's (line %d) %d x %d", standards[k].info->width,
                         standards[k].info->height, standards[0].row->line, standards[0].info->width,
                         standards[0].info->height);
    if (without)
        uf_fault_add(
            job->faults, UF_WARNING, "pixel_size", place_of(job, first, UF_SHEET_NEAR),
            "%d images do not say how large their pixels are; the instrument file must: [pixel] size_um = ...",
            without);
}

/* ---- wide images that are not there ---------------------------------------------------------- */

static void check_wide(check_job *job)
{
    const uf_settings *settings = job->request->settings;
    int without = 0;
    const uf_sheet_row *first = NULL;
    for (int k = 0; k < job->sheet.count; k++)
        if (!*job->sheet.rows[k].text[UF_SHEET_WIDE] && !without++)
            first = &job->sheet.rows[k];
    if (!without || !job->sheet.has[UF_SHEET_WIDE] ||
        (settings && settings->cells.label == UF_LABEL_ADHESION_PROTEIN))
        return;
    uf_fault_add(
        job->faults, without < job->sheet.count ? UF_FAULT : UF_WARNING, "no_wide",
        place_of(job, first, UF_SHEET_WIDE),
        "empty in %d of %d rows; only adhesion-protein labels do without a wide image (give the assay file by -a)",
        without, job->sheet.count);
}

/* ---- all of it ------------------------------------------------------------------------------- */

static int count_words(const uf_sheet *sheet, uf_sheet_column column)
{
    int count = 0;
    for (int k = 0; k < sheet->count; k++) {
        bool before = !*sheet->rows[k].text[column];
        /* Words of one plate lie together in most sheets: the search backwards ends at once. */
        for (int i = k - 1; i >= 0 && !before; i--)
            before = strcmp(sheet->rows[i].text[column], sheet->rows[k].text[column]) == 0;
        count += !before;
    }
    return count;
}

static void free_job(check_job *job)
{
    for (int k = 0; k < job->bench_count; k++)
        uf_settings_free(&job->benches[k].settings);
    free(job->benches);
    free(job->images);
    free(job->files);
    uf_sheet_free(&job->sheet);
    free(job);
}

uf_status uf_sheet_check(const uf_sheet_check_request *request, uf_sheet_check_summary *summary, uf_error *error)
{
    *summary = (uf_sheet_check_summary){0};
    check_job *job = calloc(1, sizeof *job);
    if (!job)
        return uf_fail_memory(error, "the checks of a sheet");
    job->request = request;
    job->faults = &summary->faults;
    uf_status status = uf_sheet_read(&job->sheet, request->path, request->root, job->faults, error);
    if (status == UF_OK)
        status = uf_sheet_check_design(&job->sheet, request->pooled, job->faults, error);
    if (status == UF_OK)
        status = read_benches(job, error);
    if (status == UF_OK)
        status = list_images(job, error);
    if (status == UF_OK)
        status = look_at_images(job, error);
    if (status == UF_OK) {
        check_images(job);
        check_wide(job);
        summary->rows = job->sheet.count;
        summary->images = job->image_count;
        summary->plates = count_words(&job->sheet, UF_SHEET_PLATE);
        summary->sessions = count_words(&job->sheet, UF_SHEET_SESSION);
        uf_faults_sort(job->faults);
        status = uf_faults_check(job->faults, error);
    }
    free_job(job);
    return status;
}

void uf_sheet_check_free(uf_sheet_check_summary *summary)
{
    uf_faults_free(&summary->faults);
}
