/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "settings/settings.h"

#include <math.h>
#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static void *member_of(const uf_settings *settings, const uf_setting *entry)
{
    return (char *)(uintptr_t)settings + entry->offset;
}

static bool holds_text(const uf_setting *entry)
{
    return entry->kind == UF_SETTING_PATH || entry->kind == UF_SETTING_WORD;
}

uf_status uf_settings_new(uf_settings **out, uf_error *error)
{
    uf_settings *settings = calloc(1, sizeof *settings);
    *out = settings;
    if (!settings)
        return uf_fail_memory(error, "settings");
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        if (entry->kind == UF_SETTING_REAL)
            *(double *)member_of(settings, entry) = entry->initial;
        else if (entry->kind == UF_SETTING_CHOICE)
            *(int *)member_of(settings, entry) = (int)entry->initial;
    }
    return UF_OK;
}

void uf_settings_free(uf_settings **pointer)
{
    uf_settings *settings = *pointer;
    if (!settings)
        return;
    for (int k = 0; k < uf_setting_count; k++) {
        free(settings->origin[k]);
        free(settings->overridden[k]);
        if (holds_text(&uf_setting_table[k]))
            free(*(char **)member_of(settings, &uf_setting_table[k]));
    }
    free(settings);
    *pointer = NULL;
}

/* ---- choices: words between '|', those after '!' known but not in this version --------------- */

typedef struct choice_word {
    const char *start;
    int length;
    int later;
} choice_word;

static const char *next_choice(const char *at, choice_word *word)
{
    if (!*at)
        return NULL;
    word->later = *at == '!';
    word->start = at + word->later;
    word->length = (int)strcspn(word->start, "|");
    at = word->start + word->length;
    return *at == '|' ? at + 1 : at;
}

static void list_choices(uf_text *out, const char *choices, const char *between)
{
    choice_word word;
    const char *before = "";
    while ((choices = next_choice(choices, &word)))
        if (!word.later) {
            uf_text_printf(out, "%s%.*s", before, word.length, word.start);
            before = between;
        }
}

/* The word of a choice; nothing for UF_SETTING_NOT_GIVEN. */
static void put_choice(uf_text *out, const uf_setting *entry, int chosen)
{
    choice_word word = {.start = ""};
    const char *at = entry->choices;
    for (int index = chosen; index >= 0; index--)
        at = next_choice(at, &word);
    uf_text_bytes(out, word.start, (size_t)word.length);
}

static void put_list(uf_text *out, const uf_reals *list)
{
    for (int k = 0; k < list->count; k++) {
        uf_text_add(out, k ? ", " : "");
        uf_text_number(out, list->values[k], 15);
    }
}

void uf_setting_value(uf_text *out, const uf_settings *settings, int k)
{
    const uf_setting *entry = &uf_setting_table[k];
    const void *member = member_of(settings, entry);
    if (entry->kind == UF_SETTING_REAL)
        uf_text_number(out, *(const double *)member, 15);
    else if (entry->kind == UF_SETTING_REALS)
        put_list(out, member);
    else if (holds_text(entry))
        uf_text_add(out, *(char *const *)member ? *(char *const *)member : "");
    else if (entry->kind == UF_SETTING_CHOICE)
        put_choice(out, entry, *(const int *)member);
}

const uf_setting *uf_setting_at(size_t member)
{
    for (int k = 0; k < uf_setting_count; k++)
        if (uf_setting_table[k].offset == member && uf_setting_table[k].kind != UF_SETTING_LATER)
            return &uf_setting_table[k];
    return NULL;
}

/* ---- setting one value ----------------------------------------------------------------------- */

static uf_status read_number(const uf_setting *entry, const char *value, double *number, uf_error *error)
{
    if (!uf_parse_number(value, number))
        return uf_fail(error, UF_INPUT, "%s = %.80s is not a number; write it with a decimal point, like 0.11",
                       entry->key, value);
    if (*number < entry->least || *number > entry->most) {
        char least[UF_NUMBER_TEXT], most[UF_NUMBER_TEXT];
        uf_format_number(least, entry->least, 6);
        uf_format_number(most, entry->most, 6);
        return uf_fail(error, UF_INPUT, "%s = %.80s is out of range: expected %s to %s", entry->key, value, least,
                       most);
    }
    return UF_OK;
}

static uf_status set_real(uf_settings *settings, const uf_setting *entry, const char *value, uf_error *error)
{
    double number = 0;
    uf_status status = read_number(entry, value, &number, error);
    if (status == UF_OK)
        *(double *)member_of(settings, entry) = number;
    return status;
}

/* One item of a list, blanks around it cut off; says which one is wrong. */
static uf_status read_item(const uf_setting *entry, const char *item, size_t length, int position, double *number,
                           uf_error *error)
{
    char text[UF_NUMBER_TEXT + 64];
    for (; length && strchr(" \t", *item); length--)
        item++;
    while (length && strchr(" \t", item[length - 1]))
        length--;
    (void)snprintf(text, sizeof text, "%.*s", (int)(length < sizeof text ? length : sizeof text - 1), item);
    uf_status status = read_number(entry, text, number, error);
    if (status != UF_OK) {
        char where[32];
        (void)snprintf(where, sizeof where, "number %d of the list", position);
        uf_fail_in(error, status, where);
    }
    return status;
}

/* Numbers between commas. */
static uf_status set_reals(uf_settings *settings, const uf_setting *entry, const char *value, uf_error *error)
{
    uf_reals list = {0};
    for (const char *at = value; at; list.count++) {
        const char *comma = strchr(at, ',');
        if (list.count == UF_REALS_LIMIT)
            return uf_fail(error, UF_INPUT, "%s has more than %d numbers", entry->key, UF_REALS_LIMIT);
        size_t length = comma ? (size_t)(comma - at) : strlen(at);
        uf_status status = read_item(entry, at, length, list.count + 1, &list.values[list.count], error);
        if (status != UF_OK)
            return status;
        at = comma ? comma + 1 : NULL;
    }
    *(uf_reals *)member_of(settings, entry) = list;
    return UF_OK;
}

static uf_status set_choice(uf_settings *settings, const uf_setting *entry, const char *value, uf_error *error)
{
    choice_word word;
    const char *at = entry->choices;
    for (int index = 0; (at = next_choice(at, &word)); index++) {
        if (strlen(value) != (size_t)word.length || strncmp(value, word.start, (size_t)word.length) != 0)
            continue;
        if (word.later)
            return uf_fail(error, UF_INPUT, "%s = %s is not in this version", entry->key, value);
        *(int *)member_of(settings, entry) = index;
        return UF_OK;
    }
    uf_text words = {0};
    list_choices(&words, entry->choices, " or ");
    uf_fail(error, UF_INPUT, "%s = %.80s is not known: expected %s", entry->key, value,
            words.bytes ? words.bytes : "another word");
    uf_text_free(&words);
    return UF_INPUT;
}

/* A path is taken relative to the file that says it; a word as it stands. */
static uf_status set_text(uf_settings *settings, const uf_setting *entry, const char *value, const char *beside,
                          uf_error *error)
{
    if (!*value)
        return uf_fail(error, UF_INPUT, "%s is empty: expected a %s", entry->key,
                       entry->kind == UF_SETTING_WORD ? "word" : "file name");
    char *path = entry->kind == UF_SETTING_WORD ? uf_copy_string(value) : uf_path_beside(beside, value);
    if (!path)
        return uf_fail_memory(error, "settings");
    char **member = member_of(settings, entry);
    free(*member);
    *member = path;
    return UF_OK;
}

/* Remembers what an earlier file said of an entry that a later one overrides. */
static uf_status keep_overridden(uf_settings *settings, int k, uf_error *error)
{
    uf_text text = {0};
    if (!settings->origin[k])
        return UF_OK;
    uf_setting_value(&text, settings, k);
    uf_text_printf(&text, " (%s)", settings->origin[k]);
    if (text.failed)
        return uf_fail_memory(error, "settings");
    free(settings->overridden[k]);
    settings->overridden[k] = text.bytes;
    if (uf_setting_table[k].kind == UF_SETTING_REAL)
        settings->overridden_real[k] = *(const double *)member_of(settings, &uf_setting_table[k]);
    return UF_OK;
}

/* The entries of a group exclude each other: giving one takes back what an earlier file said of the rest. */
static uf_status clear_rest_of_group(uf_settings *settings, int chosen, uf_error *error)
{
    uf_status status = UF_OK;
    const char *group = uf_setting_table[chosen].group;
    for (int k = 0; status == UF_OK && group && k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        if (k == chosen || !entry->group || strcmp(entry->group, group) != 0)
            continue;
        status = keep_overridden(settings, k, error);
        if (entry->kind == UF_SETTING_CHOICE)
            *(int *)member_of(settings, entry) = UF_SETTING_NOT_GIVEN;
        else
            *(double *)member_of(settings, entry) = (double)NAN;
        free(settings->origin[k]);
        settings->origin[k] = NULL;
    }
    return status;
}

static uf_status set_entry(uf_settings *settings, int k, const char *value, const char *path, int line,
                           uf_error *error)
{
    const uf_setting *entry = &uf_setting_table[k];
    uf_status status = keep_overridden(settings, k, error);
    if (status != UF_OK)
        return status;
    switch (entry->kind) {
    case UF_SETTING_LATER:
        return uf_fail(error, UF_INPUT, "[%s] %s is not in this version; take the line out to go on", entry->section,
                       entry->key);
    case UF_SETTING_REAL:
        status = set_real(settings, entry, value, error);
        break;
    case UF_SETTING_REALS:
        status = set_reals(settings, entry, value, error);
        break;
    case UF_SETTING_CHOICE:
        status = set_choice(settings, entry, value, error);
        break;
    case UF_SETTING_PATH:
    case UF_SETTING_WORD:
        status = set_text(settings, entry, value, path, error);
        break;
    }
    if (status == UF_OK)
        status = clear_rest_of_group(settings, k, error);
    if (status != UF_OK)
        return status;
    uf_text origin = {0};
    uf_text_add(&origin, path);
    if (line)
        uf_text_printf(&origin, ":%d", line);
    if (origin.failed)
        return uf_fail_memory(error, "settings");
    free(settings->origin[k]);
    settings->origin[k] = origin.bytes;
    return UF_OK;
}

/* ---- finding an entry ------------------------------------------------------------------------ */

static bool section_known(const char *section, uf_settings_kind kind)
{
    for (int k = 0; k < uf_setting_count; k++)
        if (uf_setting_table[k].file == kind && strcmp(uf_setting_table[k].section, section) == 0)
            return true;
    return false;
}

static int find_entry(const char *section, const char *key, uf_settings_kind kind)
{
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        if (entry->file == kind && strcmp(entry->section, section) == 0 && strcmp(entry->key, key) == 0)
            return k;
    }
    return -1;
}

static const char *file_word(uf_settings_kind kind)
{
    return kind == UF_INSTRUMENT_FILE ? "an instrument file" : "an assay file";
}

static uf_status unknown_section(const char *section, uf_settings_kind kind, uf_error *error)
{
    uf_settings_kind other = kind == UF_INSTRUMENT_FILE ? UF_ASSAY_FILE : UF_INSTRUMENT_FILE;
    if (section_known(section, other))
        return uf_fail(error, UF_INPUT, "[%s] belongs into %s, this is %s", section, file_word(other),
                       file_word(kind));
    const char *nearest = "";
    int least = 1000;
    for (int k = 0; k < uf_setting_count; k++) {
        int distance = uf_edit_distance(section, uf_setting_table[k].section);
        if (uf_setting_table[k].file == kind && distance < least) {
            least = distance;
            nearest = uf_setting_table[k].section;
        }
    }
    return uf_fail(error, UF_INPUT, "unknown section [%.60s]; the nearest is [%s]", section, nearest);
}

/* Nearest by letters; the same key elsewhere in the file's kind is nearer than any misspelling. */
static uf_status unknown_key(const char *section, const char *key, uf_settings_kind kind, uf_error *error)
{
    const uf_setting *nearest = NULL;
    int least = 1000;
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        bool here = strcmp(entry->section, section) == 0;
        int distance = 2 * uf_edit_distance(key, entry->key) + !here;
        if (entry->file == kind && distance < least) {
            least = distance;
            nearest = entry;
        }
    }
    if (nearest && strcmp(nearest->section, section) != 0)
        return uf_fail(error, UF_INPUT, "unknown key '%.60s' in [%s]; the nearest is %s in [%s]", key, section,
                       nearest->key, nearest->section);
    return uf_fail(error, UF_INPUT, "unknown key '%.60s' in [%s]; the nearest is %s", key, section,
                   nearest ? nearest->key : "none");
}

uf_status uf_settings_set(uf_settings *settings, const char *section, const char *key, const char *value,
                          uf_error *error)
{
    for (uf_settings_kind kind = UF_INSTRUMENT_FILE; kind <= UF_ASSAY_FILE; kind++) {
        if (!section_known(section, kind))
            continue;
        int k = find_entry(section, key, kind);
        return k < 0 ? unknown_key(section, key, kind, error)
                     : set_entry(settings, k, value, "set by the caller", 0, error);
    }
    return unknown_section(section, UF_INSTRUMENT_FILE, error);
}

/* ---- INI text -------------------------------------------------------------------------------- */

enum { LINE_LIMIT = 4096 };

/* One line, copied so that it can be cut up in place. */
typedef struct ini_line {
    char text[LINE_LIMIT];
    int number;
} ini_line;

static char *trim(char *text)
{
    text += strspn(text, " \t");
    size_t length = strlen(text);
    while (length && strchr(" \t\r", text[length - 1]))
        text[--length] = '\0';
    return text;
}

/* A comment starts with '#' or ';' at the start of a line or after a blank. */
static void cut_comment(char *text)
{
    for (char *p = text; *p; p++)
        if ((*p == '#' || *p == ';') && (p == text || p[-1] == ' ' || p[-1] == '\t')) {
            *p = '\0';
            return;
        }
}

typedef struct ini_reader {
    uf_settings *settings;
    uf_settings_kind kind;
    const char *path;
    char section[64];
    int line_of[UF_SETTINGS_LIMIT]; /* where this file set entry k, 0: nowhere */
} ini_reader;

static uf_status read_section(ini_reader *reader, char *text, uf_error *error)
{
    char *end = strchr(text, ']');
    if (!end || end[1] || (size_t)(end - text) > sizeof reader->section)
        return uf_fail(error, UF_INPUT, "'%.60s' is no section; write it like [light]", text);
    *end = '\0';
    char *name = trim(text + 1);
    if (!section_known(name, reader->kind))
        return unknown_section(name, reader->kind, error);
    strcpy(reader->section, name);
    return UF_OK;
}

/* Refuses an entry, or another of its group, that this file has given already. */
static uf_status refuse_second(const ini_reader *reader, int k, uf_error *error)
{
    const uf_setting *entry = &uf_setting_table[k];
    if (reader->line_of[k])
        return uf_fail(error, UF_INPUT, "%s is given twice, first in line %d", entry->key, reader->line_of[k]);
    for (int j = 0; entry->group && j < uf_setting_count; j++)
        if (reader->line_of[j] && uf_setting_table[j].group && strcmp(uf_setting_table[j].group, entry->group) == 0)
            return uf_fail(error, UF_INPUT, "%s contradicts %s in line %d: give one of them", entry->key,
                           uf_setting_table[j].key, reader->line_of[j]);
    return UF_OK;
}

static uf_status read_pair(ini_reader *reader, char *text, int line, uf_error *error)
{
    char *equals = strchr(text, '=');
    if (!equals)
        return uf_fail(error, UF_INPUT, "'%.60s' is neither [section] nor key = value", text);
    *equals = '\0';
    char *key = trim(text), *value = trim(equals + 1);
    if (!*reader->section)
        return uf_fail(error, UF_INPUT, "'%.60s' stands before any [section]", key);
    int k = find_entry(reader->section, key, reader->kind);
    if (k < 0)
        return unknown_key(reader->section, key, reader->kind, error);
    uf_status status = refuse_second(reader, k, error);
    if (status != UF_OK)
        return status;
    reader->line_of[k] = line;
    return set_entry(reader->settings, k, value, reader->path, line, error);
}

static uf_status read_line(ini_reader *reader, ini_line *line, uf_error *error)
{
    cut_comment(line->text);
    char *text = trim(line->text);
    if (!*text)
        return UF_OK;
    return *text == '[' ? read_section(reader, text, error) : read_pair(reader, text, line->number, error);
}

static uf_status fail_at_line(const ini_reader *reader, int line, uf_status status, uf_error *error)
{
    uf_text where = {0};
    uf_text_printf(&where, "%s:%d", reader->path, line);
    uf_fail_in(error, status, where.bytes ? where.bytes : reader->path);
    uf_text_free(&where);
    return status;
}

uf_status uf_settings_parse(uf_settings *settings, const char *text, size_t length, const char *path,
                            uf_settings_kind kind, uf_error *error)
{
    ini_reader reader = {.settings = settings, .kind = kind, .path = path};
    ini_line line = {.number = 1};
    size_t at = length >= 3 && memcmp(text, "\xEF\xBB\xBF", 3) == 0 ? 3 : 0;
    for (; at < length; line.number++) {
        const char *end = memchr(text + at, '\n', length - at);
        size_t count = end ? (size_t)(end - (text + at)) : length - at;
        uf_status status = UF_OK;
        if (count >= LINE_LIMIT || memchr(text + at, '\0', count))
            status = uf_fail(error, UF_INPUT, "%s; expected INI text: [section] and key = value lines",
                             count >= LINE_LIMIT ? "the line is longer than 4095 bytes" : "a zero byte");
        else {
            memcpy(line.text, text + at, count);
            line.text[count] = '\0';
            status = read_line(&reader, &line, error);
        }
        if (status != UF_OK)
            return fail_at_line(&reader, line.number, status, error);
        at += count + 1;
    }
    return UF_OK;
}

/* ---- what measuring needs -------------------------------------------------------------------- */

static uf_status need(double value, const char *what, const char *section, uf_error *error)
{
    return isnan(value) ? uf_fail(error, UF_INPUT, "the instrument file says no %s; add it to [%s]", what, section)
                        : UF_OK;
}

uf_status uf_settings_check_optics(const uf_settings *s, uf_error *error)
{
    double substrate = s->interface.substrate == UF_SETTING_NOT_GIVEN ? s->interface.substrate_n : 1;
    double medium = s->interface.medium == UF_SETTING_NOT_GIVEN ? s->interface.medium_n : 1;
    uf_status status = need(s->light.wavelength_nm, "wavelength_nm", "light", error);
    if (status == UF_OK)
        status = need(substrate, "substrate_n (or substrate, by name)", "interface", error);
    return status == UF_OK ? need(medium, "medium_n (or medium, by name)", "interface", error) : status;
}

/* Gap and dye are two unknowns a pixel: two angles that differ are the least. */
static uf_status check_series(const uf_settings *settings, uf_error *error)
{
    const uf_reals *angles = &settings->series.angles_deg, *power = &settings->series.power;
    double least = 90, most = 0;
    for (int k = 0; k < angles->count; k++) {
        least = fmin(least, angles->values[k]);
        most = fmax(most, angles->values[k]);
    }
    if (power->count && power->count != angles->count)
        return uf_fail(error, UF_INPUT,
                       "[series] power has %d numbers and angles_deg %d; give one power for each angle", power->count,
                       angles->count);
    if (angles->count && !(most > least))
        return uf_fail(error, UF_INPUT,
                       "[series] angles_deg has no two different angles; a gap needs at least two, better five");
    return UF_OK;
}

uf_status uf_settings_check(const uf_settings *settings, uf_error *error)
{
    bool by_series = settings->series.angles_deg.count > 0;
    uf_status status = check_series(settings, error);
    if (status == UF_OK)
        status = uf_settings_check_optics(settings, error);
    bool assumed = settings->reference.from != UF_SETTING_NOT_GIVEN;
    bool no_gap = settings->cells.label == UF_LABEL_ADHESION_PROTEIN;
    if (status == UF_OK && !by_series && !assumed && !no_gap)
        status =
            need(settings->reference.ratio, "ratio (or from = cell, with an assumed gap_nm)", "reference", error);
    if (status != UF_OK)
        return status;
    if (!by_series && isnan(settings->interface.angle_deg) && isnan(settings->interface.na_effective) &&
        isnan(settings->interface.depth_nm))
        return uf_fail(error, UF_INPUT,
                       "the instrument file says no angle; add angle_deg, na_effective or depth_nm to [interface]");
    if (settings->reference.from == UF_FROM_WELLS || settings->reference.from == UF_FROM_POOLED)
        return uf_fail(error, UF_INPUT,
                       "from = wells or pooled needs the fields of a sheet: underfoot plate SHEET; for one field "
                       "give a ratio, or "
                       "from = cell");
    if (settings->cells.label != UF_LABEL_MEMBRANE && by_series)
        return uf_fail(error, UF_INPUT, "a series of angles needs label = membrane; take [series] out, or the label");
    if (settings->cells.label != UF_LABEL_MEMBRANE && settings->reference.kind == UF_REFERENCE_FILM)
        return uf_fail(error, UF_INPUT,
                       "kind = film stands for a membrane's dye; with another label use kind = cell");
    if (settings->contact.focal_nm > settings->contact.close_nm)
        return uf_fail(error, UF_INPUT, "focal_nm is larger than close_nm; the focal band must be the closer one");
    if (settings->spots.min_length_um > settings->spots.max_length_um)
        return uf_fail(error, UF_INPUT, "[spots] min_length_um is larger than max_length_um");
    if (settings->cells.min_area_um2 > settings->cells.max_area_um2)
        return uf_fail(error, UF_INPUT, "[cells] min_area_um2 is larger than max_area_um2");
    return UF_OK;
}

/* ---- help ------------------------------------------------------------------------------------ */

static void put_range(uf_text *out, const uf_setting *entry)
{
    if (entry->kind == UF_SETTING_CHOICE)
        list_choices(out, entry->choices, " | ");
    else if (holds_text(entry))
        uf_text_add(out, entry->kind == UF_SETTING_WORD ? "word" : "file");
    else {
        if (entry->kind == UF_SETTING_REALS)
            uf_text_add(out, "numbers between commas, each ");
        uf_text_number(out, entry->least, 6);
        uf_text_add(out, " to ");
        uf_text_number(out, entry->most, 6);
    }
}

static void put_default(uf_text *out, const uf_setting *entry)
{
    if (entry->kind == UF_SETTING_CHOICE)
        put_choice(out, entry, (int)entry->initial);
    else if (entry->kind == UF_SETTING_REAL)
        uf_text_number(out, entry->initial, 6);
}

typedef void put_entry(uf_text *out, const uf_setting *entry);

static void put_entries(uf_text *out, uf_settings_kind kind, put_entry *put, const char *section_format)
{
    const char *section = "";
    for (int k = 0; k < uf_setting_count; k++) {
        const uf_setting *entry = &uf_setting_table[k];
        if (entry->file != kind || entry->kind == UF_SETTING_LATER)
            continue;
        if (strcmp(section, entry->section) != 0) {
            section = entry->section;
            uf_text_add(out, section_format);
            uf_text_printf(out, "[%s]\n", section);
        }
        put(out, entry);
    }
}

static void put_help_line(uf_text *out, const uf_setting *entry)
{
    uf_text value = {0};
    put_range(&value, entry);
    uf_text initial = {0};
    put_default(&initial, entry);
    uf_text_printf(out, "  %-20s %s", entry->key, value.bytes ? value.bytes : "");
    if (initial.length)
        uf_text_printf(out, " (default %s)", initial.bytes);
    uf_text_printf(out, "\n      %s\n", entry->help);
    uf_text_free(&value);
    uf_text_free(&initial);
}

void uf_settings_help(uf_text *out, uf_settings_kind kind)
{
    put_entries(out, kind, put_help_line, "");
}

static void put_escaped_bars(uf_text *out, const char *text)
{
    for (; *text; text++) {
        if (*text == '|')
            uf_text_add(out, "\\");
        uf_text_bytes(out, text, 1);
    }
}

static void put_page_line(uf_text *out, const uf_setting *entry)
{
    uf_text range = {0};
    put_range(&range, entry);
    uf_text_printf(out, "- `%s`: ", entry->key);
    uf_text_add(out, entry->help);
    uf_text_add(out, " *(");
    put_escaped_bars(out, range.bytes ? range.bytes : "");
    uf_text initial = {0};
    put_default(&initial, entry);
    if (initial.length)
        uf_text_printf(out, "; default %s", initial.bytes);
    uf_text_add(out, ")*\n");
    uf_text_free(&range);
    uf_text_free(&initial);
}

void uf_settings_page(uf_text *out)
{
    uf_text_add(out,
                "# Settings\n\n"
                "Made by `make docs` from `src/settings/table.c`; change it there.\n\n"
                "Both files are INI text: `[section]`, then `key = value`, comments after `#` or `;`. Units stand "
                "in the names. Paths are relative to the file that names them. An unknown key is an error, so that "
                "a slip of the pen never becomes a default. `-i` and `-a` may be repeated; later files override "
                "earlier ones.\n\n"
                "## Instrument file: facts about the bench (`-i`)\n");
    put_entries(out, UF_INSTRUMENT_FILE, put_page_line, "\n### ");
    uf_text_add(out, "\n## Assay file: choices about the analysis (`-a`)\n");
    put_entries(out, UF_ASSAY_FILE, put_page_line, "\n### ");
}
