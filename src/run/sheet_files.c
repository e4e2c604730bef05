/* SPDX-License-Identifier: GPL-3.0-or-later */
/*
 * Rows from names. Every name is held against the template; what it says but for the channel is the file's key, and files
 * of one key are one row. Nothing is passed over in silence: what is left out is counted, and why.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <strings.h>

#include "run/sheet_parts.h"
#include "sheet/sheet.h"

enum { KEY_TEXT = 512, MOST_CHANNELS = 24, CHANNEL_TEXT = 48 };
enum { NEAR, WIDE, NUCLEI, MASK, ROLES };

/* A file that the template fits. */
typedef struct found_file {
    char key[KEY_TEXT];
    const char *dir, *name; /* path is dir/name */
    int role;               /* NEAR .. MASK; 0 without {channel} */
    uf_draft_row row;       /* what its name says */
} found_file;

typedef struct channel_count {
    char name[CHANNEL_TEXT];
    int files;
} channel_count;

typedef struct search {
    build_job *job;
    const char *tags[ROLES];
    bool known_only; /* {channel} may be one of the tags only */
    uf_template excludes[16];
    found_file *files;
    int count, capacity;
    int seen, dot_files, thumbnails, excluded, unlike; /* names, and those left out by reason */
    char unlike_example[256];
    int other_channels; /* files of channels not asked for */
    channel_count channels[MOST_CHANNELS];
    int channel_count;
} search;

/* ---- what a name may say --------------------------------------------------------------------- */

static bool fits(void *context, int field, const char *value, size_t length)
{
    const search *s = context;
    char text[CHANNEL_TEXT];
    uf_well well;
    double number;
    int column = s->job->columns[field];
    if (field == s->job->channel) {
        for (int k = 0; s->known_only && k < ROLES; k++)
            if (s->tags[k] && strlen(s->tags[k]) == length && strncmp(s->tags[k], value, length) == 0)
                return true;
        return !s->known_only;
    }
    if (column != UF_SHEET_WELL && column != UF_SHEET_TIME_MIN)
        return true;
    if (length >= sizeof text)
        return false;
    memcpy(text, value, length);
    text[length] = '\0';
    if (column == UF_SHEET_TIME_MIN)
        return uf_parse_number(text, &number);
    return s->job->any_well || uf_well_parse(text, &well);
}

/* Small pictures that microscopes and file managers leave beside the images. */
static bool is_thumbnail(const char *name)
{
    for (; *name; name++)
        if (strncasecmp(name, "thumb", 5) == 0)
            return true;
    return false;
}

static bool is_excluded(search *s, const char *name)
{
    uf_span spans[UF_TEMPLATE_FIELDS];
    for (int k = 0; k < s->job->request->exclude_count; k++)
        if (uf_template_match(&s->excludes[k], s->excludes[k].slashes ? name : uf_base_name(name), NULL, NULL, spans,
                              NULL))
            return true;
    return false;
}

/* ---- one file -------------------------------------------------------------------------------- */

static void count_channel(search *s, const char *name, size_t length)
{
    int k = 0;
    length = length < CHANNEL_TEXT ? length : CHANNEL_TEXT - 1;
    while (k < s->channel_count && (strncmp(s->channels[k].name, name, length) != 0 || s->channels[k].name[length]))
        k++;
    if (k == MOST_CHANNELS)
        return;
    if (k == s->channel_count) {
        memcpy(s->channels[k].name, name, length);
        s->channels[k].name[length] = '\0';
        s->channels[s->channel_count++].files = 0;
    }
    s->channels[k].files++;
}

static found_file *add_file(search *s)
{
    if (s->count == s->capacity) {
        int capacity = s->capacity ? 2 * s->capacity : 64;
        found_file *files = realloc(s->files, (size_t)capacity * sizeof *files);
        if (!files)
            return NULL;
        s->files = files;
        s->capacity = capacity;
    }
    return &s->files[s->count++];
}

static void add_to_key(char *key, int column, const char *value)
{
    size_t used = strlen(key);
    if (used + 2 >= KEY_TEXT)
        return;
    key[used] = '\x1f';
    uf_cell_key(column, value, key + used + 1, KEY_TEXT - used - 1);
}

static uf_status take_file(search *s, const char *dir, const char *name, const uf_span *spans)
{
    build_job *job = s->job;
    found_file *file = add_file(s);
    if (!file)
        return uf_fail_memory(job->error, "the names of images");
    *file = (found_file){.dir = dir, .name = name};
    for (int k = 0; k < job->name.field_count; k++) {
        const char *value = uf_draft_keep(&job->draft, name + spans[k].at, spans[k].length);
        if (!value)
            return uf_fail_memory(job->error, "the names of images");
        if (k != job->channel) {
            file->row.cells[job->columns[k]] = value;
            add_to_key(file->key, job->columns[k], value);
            continue;
        }
        count_channel(s, value, spans[k].length);
        for (int r = 0; r < ROLES; r++)
            if (s->tags[r] && strcmp(s->tags[r], value) == 0)
                file->role = r;
    }
    if (job->channel < 0 && job->name.field_count == 0)
        add_to_key(file->key, UF_SHEET_NEAR, name);
    return UF_OK;
}

static void report_ambiguous(search *s, const char *dir, const char *name, const uf_span *one, const uf_span *other)
{
    const build_job *job = s->job;
    for (int k = 0; k < job->name.field_count; k++)
        if (one[k].at != other[k].at || one[k].length != other[k].length) {
            uf_fault_add(
                &s->job->summary->faults, UF_FAULT, "ambiguous_name", (uf_place){dir, 0, NULL},
                "'%.200s' can be read in two ways: %s is '%.*s' or '%.*s'; a name's parts need a letter between "
                "them that they do not hold themselves, so write more of it out in --name",
                name, job->name.fields[k], (int)one[k].length, name + one[k].at, (int)other[k].length,
                name + other[k].at);
            return;
        }
}

static uf_status see_name(search *s, const char *dir, const char *name)
{
    uf_span spans[UF_TEMPLATE_FIELDS], other[UF_TEMPLATE_FIELDS];
    const uf_template *t = &s->job->name;
    const char *base = uf_base_name(name);
    s->seen++;
    if (base[0] == '.') {
        s->dot_files++;
        return UF_OK;
    }
    if (is_thumbnail(name)) {
        s->thumbnails++;
        return UF_OK;
    }
    if (is_excluded(s, name)) {
        s->excluded++;
        return UF_OK;
    }
    s->known_only = true;
    int ways = uf_template_match(t, name, fits, s, spans, other);
    if (ways == 2)
        report_ambiguous(s, dir, name, spans, other);
    if (ways)
        return take_file(s, dir, name, spans);
    s->known_only = false;
    if (s->job->channel >= 0 && uf_template_match(t, name, fits, s, spans, NULL)) {
        s->other_channels++;
        count_channel(s, name + spans[s->job->channel].at, spans[s->job->channel].length);
        return UF_OK;
    }
    if (!s->unlike++)
        (void)snprintf(s->unlike_example, sizeof s->unlike_example, "%s", name);
    return UF_OK;
}

/* ---- rows ------------------------------------------------------------------------------------ */

static int by_key(const void *a, const void *b)
{
    const found_file *one = a, *other = b;
    int order = strcmp(one->key, other->key);
    order = order ? order : one->role - other->role;
    order = order ? order : strcmp(one->dir, other->dir);
    return order ? order : strcmp(one->name, other->name);
}

static uf_status path_of(build_job *job, const found_file *file, uf_text *path)
{
    path->length = 0;
    uf_text_printf(path, "%s%s%s", file->dir, file->dir[strlen(file->dir) - 1] == '/' ? "" : "/", file->name);
    return uf_text_check(path, "the names of images", job->error);
}

/* The name that the missing partner should have. */
static void name_partner(const search *s, const found_file *file, int role, uf_text *out)
{
    const char *values[UF_TEMPLATE_FIELDS] = {NULL};
    for (int k = 0; k < s->job->name.field_count; k++)
        values[k] = k == s->job->channel ? s->tags[role] : file->row.cells[s->job->columns[k]];
    if (!uf_template_fill(&s->job->name, values, out)) {
        out->length = 0;
        uf_text_printf(out, "a file with %s for its channel", s->tags[role]);
    }
}

/* Whether the row can be used. */
static bool check_partners(search *s, const found_file *file, const bool *has)
{
    static const char *const names[] = {"near", "wide"};
    const uf_sheet_build_request *request = s->job->request;
    for (int role = NEAR; role <= WIDE; role++) {
        if (has[role] || !s->tags[role])
            continue;
        uf_text partner = {0};
        name_partner(s, file, role, &partner);
        uf_fault_add(&s->job->summary->faults, request->skip_incomplete ? UF_WARNING : UF_FAULT, "incomplete",
                     (uf_place){file->dir, 0, NULL}, "'%.200s' has no %s image: expected %.200s%s", file->name,
                     names[role], partner.bytes ? partner.bytes : "",
                     request->skip_incomplete ? "; this field is left out"
                                              : "; --skip-incomplete leaves such fields out");
        uf_text_free(&partner);
        return false;
    }
    return true;
}

static uf_status add_row(search *s, const found_file *files, int count)
{
    static const int columns[ROLES] = {UF_SHEET_NEAR, UF_SHEET_WIDE, UF_SHEET_NUCLEI, UF_SHEET_MASK};
    build_job *job = s->job;
    uf_draft_row like = files[0].row;
    uf_text path = {0};
    bool has[ROLES] = {false};
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < count; k++) {
        const found_file *file = &files[k];
        if (k && files[k - 1].role == file->role) {
            bool folders = strcmp(files[k - 1].dir, file->dir) != 0;
            uf_fault_add(&job->summary->faults, UF_FAULT, "two_files", (uf_place){file->dir, 0, NULL},
                         "'%.200s'%s%.100s and '%.200s' are both the %s image of one field; %s", files[k - 1].name,
                         folders ? " in " : "", folders ? files[k - 1].dir : "", file->name,
                         uf_sheet_columns[columns[file->role]].name,
                         folders ? "build from the folder above both, and name theirs in --name, like '{session}/...'"
                                 : "move one of them away, or name in --name what tells them apart");
            continue;
        }
        has[file->role] = true;
        status = path_of(job, file, &path);
        like.cells[columns[file->role]] = status == UF_OK ? build_path(job, path.bytes) : NULL;
        if (status == UF_OK && !like.cells[columns[file->role]])
            status = uf_fail_memory(job->error, "the names of images");
    }
    if (status == UF_OK && job->channel < 0)
        status = build_from_file(job, path.bytes, &like);
    else if (status == UF_OK && check_partners(s, &files[0], has)) {
        uf_draft_row *row = uf_draft_add(&job->draft);
        if (row)
            *row = like;
        else
            status = uf_fail_memory(job->error, "the names of images");
    }
    uf_text_free(&path);
    return status;
}

/* ---- what was left out ----------------------------------------------------------------------- */

static void list_channels(const search *s, uf_text *out)
{
    for (int k = 0; k < s->channel_count; k++)
        uf_text_printf(out, "%s%s (%d)", k ? ", " : "", s->channels[k].name, s->channels[k].files);
}

static void say_left_out(search *s)
{
    uf_faults *faults = &s->job->summary->faults;
    const uf_place here = {s->job->request->dirs[0], 0, NULL};
    uf_text channels = {0};
    const struct {
        int count;
        const char *what;
    } reasons[] = {
        {s->dot_files, "names that begin with a dot"}, {s->thumbnails, "thumbnails"}, {s->excluded, "by --exclude"}};
    uf_text left_out = {0};
    for (size_t k = 0; k < sizeof reasons / sizeof reasons[0]; k++)
        if (reasons[k].count)
            uf_text_printf(&left_out, "%s%d %s", left_out.length ? ", " : "", reasons[k].count, reasons[k].what);
    if (left_out.length)
        uf_fault_add(faults, UF_NOTE, "left_out", here, "left out: %s", left_out.bytes);
    uf_text_free(&left_out);
    if (s->unlike)
        uf_fault_add(faults, UF_NOTE, "left_out", here, "%d files have other names than --name says ('%.200s')",
                     s->unlike, s->unlike_example);
    list_channels(s, &channels);
    if (s->other_channels)
        uf_fault_add(faults, UF_NOTE, "left_out", here, "%d files are of other channels; met were %.300s",
                     s->other_channels, channels.bytes);
    uf_text_free(&channels);
}

/* In which letters a name would have fitted: the template's text in lower case. */
static bool fits_in_lower_case(const search *s, const char *name)
{
    char lower[2][512];
    uf_template t;
    uf_span spans[UF_TEMPLATE_FIELDS];
    const char *texts[2] = {s->job->request->name, name};
    for (int k = 0; k < 2; k++) {
        size_t length = strlen(texts[k]);
        if (length >= sizeof lower[k])
            return false;
        for (size_t i = 0; i <= length; i++)
            lower[k][i] = texts[k][i] >= 'A' && texts[k][i] <= 'Z' ? (char)(texts[k][i] - 'A' + 'a') : texts[k][i];
    }
    return uf_template_parse(&t, lower[0], NULL) == UF_OK &&
           uf_template_match(&t, lower[1], NULL, NULL, spans, NULL) > 0;
}

static uf_status nothing_found(search *s)
{
    const uf_sheet_build_request *request = s->job->request;
    uf_folder deeper;
    uf_text channels = {0};
    uf_span spans[UF_TEMPLATE_FIELDS];
    uf_status status;
    list_channels(s, &channels);
    const char *dir = request->dirs[0];
    int below = 0;
    if (s->job->name.slashes == 0 && uf_folder_list(&deeper, dir, 3, NULL) == UF_OK) {
        for (int k = 0; k < deeper.count; k++)
            below += strchr(deeper.names[k], '/') &&
                     uf_template_match(&s->job->name, uf_base_name(deeper.names[k]), fits, s, spans, NULL) > 0;
        uf_folder_free(&deeper);
    }
    if (s->other_channels)
        status = uf_fail(s->job->error, UF_INPUT,
                         "%.300s: no file is of channel '%.40s'; met were %.300s: give one of them as --near-channel",
                         dir, s->tags[NEAR] ? s->tags[NEAR] : "", channels.bytes);
    else if (below)
        status =
            uf_fail(s->job->error, UF_INPUT,
                    "%.300s: no name there fits '%.200s', but %d in the folders below do; name the folder, too, like "
                    "'{plate}/%.200s', or '{*}/...' where it does not matter",
                    dir, request->name, below, request->name);
    else if (s->unlike && uf_template_match(&s->job->name, s->unlike_example, NULL, NULL, spans, NULL) > 0)
        status = uf_fail(
            s->job->error, UF_INPUT,
            "%.300s: '%.200s' would fit '%.200s' if its {well} were a well, like B07 (or its {time_min} a number); "
            "with --vessel coverslip or dish any name will do",
            dir, s->unlike_example, request->name);
    else if (s->unlike && fits_in_lower_case(s, s->unlike_example))
        status = uf_fail(s->job->error, UF_INPUT,
                         "%.300s: no name fits '%.200s', but '%.200s' would in other letters; "
                         "write --name as the files are written",
                         dir, request->name, s->unlike_example);
    else
        status = uf_fail(
            s->job->error, UF_INPUT,
            "%.300s: none of %d names fits '%.200s'%s%.200s%s; write --name as the files are named, with fields "
            "for what differs",
            dir, s->seen, request->name, s->unlike ? " (one is '" : "", s->unlike_example, s->unlike ? "')" : "");
    uf_text_free(&channels);
    return status;
}

/* ---- all of it ------------------------------------------------------------------------------- */

static uf_status see_folders(search *s, uf_folder *folders)
{
    const build_job *job = s->job;
    uf_status status = UF_OK;
    for (int d = 0; status == UF_OK && d < job->request->dir_count; d++) {
        const char *dir = job->request->dirs[d];
        status = uf_folder_list(&folders[d], dir, job->name.slashes, job->error);
        for (int k = 0; status == UF_OK && k < folders[d].count; k++)
            status = see_name(s, dir, folders[d].names[k]);
    }
    return status;
}

static uf_status parse_excludes(search *s)
{
    const uf_sheet_build_request *request = s->job->request;
    uf_status status = UF_OK;
    if (request->exclude_count > (int)(sizeof s->excludes / sizeof s->excludes[0]))
        return uf_fail(s->job->error, UF_USAGE, "--exclude is given more than 16 times");
    for (int k = 0; status == UF_OK && k < request->exclude_count; k++)
        status = uf_template_parse(&s->excludes[k], request->excludes[k], s->job->error);
    return status;
}

uf_status build_from_files(build_job *job)
{
    const uf_sheet_build_request *request = job->request;
    search *s = calloc(1, sizeof *s);
    uf_folder *folders = calloc((size_t)request->dir_count + 1, sizeof *folders);
    if (!s || !folders) {
        free(s);
        free(folders);
        return uf_fail_memory(job->error, "the names of images");
    }
    *s = (search){
        .job = job,
        .tags = {request->near_channel, request->wide_channel, request->nuclei_channel, request->mask_channel}};
    uf_status status = parse_excludes(s);
    if (status == UF_OK)
        status = see_folders(s, folders);
    if (status == UF_OK && s->count == 0)
        status = nothing_found(s);
    if (status == UF_OK) {
        qsort(s->files, (size_t)s->count, sizeof *s->files, by_key);
        say_left_out(s);
    }
    for (int from = 0, to; status == UF_OK && from < s->count; from = to) {
        for (to = from + 1; to < s->count && strcmp(s->files[to].key, s->files[from].key) == 0;)
            to++;
        status = add_row(s, s->files + from, to - from);
    }
    for (int d = 0; d < request->dir_count; d++)
        uf_folder_free(&folders[d]);
    free(folders);
    free(s->files);
    free(s);
    return status;
}
