/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "sheet/template.h"

#include <string.h>

/* ---- taking apart ---------------------------------------------------------------------------- */

int uf_template_field(const uf_template *t, const char *name)
{
    for (int k = 0; k < t->field_count; k++)
        if (strcmp(t->fields[k], name) == 0)
            return k;
    return -1;
}

static uf_status add_part(uf_template *t, uf_template_part part, const char *text, uf_error *error)
{
    if (t->part_count == UF_TEMPLATE_PARTS)
        return uf_fail(error, UF_USAGE, "'%.200s' has more than %d parts; use {*} for what does not matter", text,
                       UF_TEMPLATE_PARTS);
    if (part.kind != UF_PART_LITERAL && t->part_count && t->parts[t->part_count - 1].kind != UF_PART_LITERAL)
        return uf_fail(error, UF_USAGE,
                       "'%.200s': two fields side by side; nothing tells where one ends, so put what lies between "
                       "them there",
                       text);
    t->parts[t->part_count++] = part;
    return UF_OK;
}

static uf_status add_field(uf_template *t, const char *name, size_t length, const char *text, uf_error *error)
{
    if (length == 1 && *name == '*')
        return add_part(t, (uf_template_part){.kind = UF_PART_ANYTHING}, text, error);
    if (length == 0 || length >= sizeof t->fields[0])
        return uf_fail(error, UF_USAGE, "'%.200s': a field needs a name of 1 to %zu letters, like {well}", text,
                       sizeof t->fields[0] - 1);
    char word[sizeof t->fields[0]];
    memcpy(word, name, length);
    word[length] = '\0';
    int field = uf_template_field(t, word);
    if (field < 0 && t->field_count == UF_TEMPLATE_FIELDS)
        return uf_fail(error, UF_USAGE, "'%.200s' has more than %d fields", text, UF_TEMPLATE_FIELDS);
    t->repeats |= field >= 0;
    if (field < 0) {
        field = t->field_count++;
        memcpy(t->fields[field], word, length + 1);
    }
    return add_part(t, (uf_template_part){.kind = UF_PART_FIELD, .field = field}, text, error);
}

static void find_extension(uf_template *t)
{
    uf_template_part *last = t->part_count ? &t->parts[t->part_count - 1] : NULL;
    for (int k = 0; k < t->part_count; k++)
        t->parts[k].blind_from = t->parts[k].length;
    if (!last || last->kind != UF_PART_LITERAL)
        return;
    for (size_t k = last->length; k > 0; k--)
        if (last->text[k - 1] == '.') {
            last->blind_from = k;
            return;
        }
}

uf_status uf_template_parse(uf_template *t, const char *text, uf_error *error)
{
    uf_status status = UF_OK;
    *t = (uf_template){0};
    if (!*text)
        return uf_fail(error, UF_USAGE,
                       "the name template is empty; expected one like '{well}_{field}_{channel}.tif'");
    for (const char *p = text; *p && status == UF_OK;) {
        size_t length = strcspn(p, "{}");
        if (length) {
            for (size_t k = 0; k < length; k++)
                t->slashes += p[k] == '/';
            status =
                add_part(t, (uf_template_part){.kind = UF_PART_LITERAL, .text = p, .length = length}, text, error);
            p += length;
            continue;
        }
        const char *end = *p == '{' ? strpbrk(p + 1, "{}") : NULL;
        if (!end || *end != '}')
            return uf_fail(error, UF_USAGE, "'%.200s': a brace without its partner; expected fields like {well}",
                           text);
        status = add_field(t, p + 1, (size_t)(end - p - 1), text, error);
        p = end + 1;
    }
    find_extension(t);
    return status;
}

/* ---- matching -------------------------------------------------------------------------------- */

/*
 * Depth first over parts and places. What failed once from a part at a place fails always (unless a field occurs
 * twice, and what it was before matters), so failures are remembered and the work is bounded by parts x letters x
 * letters however many {*} there are.
 */
typedef struct matching {
    const uf_template *t;
    const char *name;
    size_t length;
    uf_field_fits *fits;
    void *context;
    uf_span now[UF_TEMPLATE_FIELDS], *first, *second;
    bool set[UF_TEMPLATE_FIELDS];
    int ways;
    long steps;                                                        /* a bound for templates whose fields repeat */
    unsigned char dead[UF_TEMPLATE_PARTS][(UF_TEMPLATE_NAME + 8) / 8]; /* bits by place */
} matching;

static int lower(char c)
{
    return c >= 'A' && c <= 'Z' ? c - 'A' + 'a' : (unsigned char)c;
}

static bool literal_fits(const matching *m, const uf_template_part *part, size_t at)
{
    if (m->length - at < part->length || memcmp(m->name + at, part->text, part->blind_from) != 0)
        return false;
    for (size_t k = part->blind_from; k < part->length; k++)
        if (lower(m->name[at + k]) != lower(part->text[k]))
            return false;
    return true;
}

static bool same_as_first(const matching *m)
{
    for (int k = 0; k < m->t->field_count; k++)
        if (m->now[k].length != m->first[k].length ||
            memcmp(m->name + m->now[k].at, m->name + m->first[k].at, m->now[k].length) != 0)
            return false;
    return true;
}

static void take_way(matching *m)
{
    size_t size = sizeof *m->first * (size_t)m->t->field_count;
    if (m->ways == 0) {
        memcpy(m->first, m->now, size);
        m->ways = 1;
    } else if (!same_as_first(m)) {
        if (m->second)
            memcpy(m->second, m->now, size);
        m->ways = 2;
    }
}

static bool field_fits(const matching *m, int field, size_t at, size_t length)
{
    if (m->set[field])
        return m->now[field].length == length && memcmp(m->name + m->now[field].at, m->name + at, length) == 0;
    return !m->fits || m->fits(m->context, field, m->name + at, length);
}

/* Whether anything matched from here. */
static bool match_from(matching *m, int p, size_t at);

static bool match_field(matching *m, int p, size_t at)
{
    const uf_template_part *part = &m->t->parts[p];
    bool is_field = part->kind == UF_PART_FIELD, any = false;
    size_t most = strcspn(m->name + at, "/");
    for (size_t length = is_field; length <= most && m->ways < 2; length++) {
        if (!is_field) {
            any |= match_from(m, p + 1, at + length);
            continue;
        }
        if (!field_fits(m, part->field, at, length))
            continue;
        bool was_set = m->set[part->field];
        uf_span before = m->now[part->field];
        m->set[part->field] = true;
        m->now[part->field] = (uf_span){at, length};
        any |= match_from(m, p + 1, at + length);
        m->set[part->field] = was_set;
        m->now[part->field] = before;
    }
    return any;
}

static bool match_from(matching *m, int p, size_t at)
{
    enum { MOST_STEPS = 1000000 };
    if (p == m->t->part_count) {
        if (at == m->length)
            take_way(m);
        return at == m->length;
    }
    unsigned char *dead = &m->dead[p][at / 8], bit = (unsigned char)(1u << at % 8);
    if (*dead & bit || ++m->steps > MOST_STEPS)
        return false;
    const uf_template_part *part = &m->t->parts[p];
    bool any;
    if (part->kind == UF_PART_LITERAL)
        any = literal_fits(m, part, at) && match_from(m, p + 1, at + part->length);
    else
        any = match_field(m, p, at);
    if (!any && !m->t->repeats)
        *dead |= bit;
    return any;
}

int uf_template_match(const uf_template *t, const char *name, uf_field_fits *fits, void *context, uf_span *spans,
                      uf_span *other)
{
    matching m = {.t = t, .name = name, .length = strlen(name), .fits = fits, .context = context, .first = spans};
    m.second = other;
    if (m.length > UF_TEMPLATE_NAME)
        return 0;
    (void)match_from(&m, 0, 0);
    return m.ways;
}

bool uf_template_fill(const uf_template *t, const char *const *values, uf_text *out)
{
    for (int k = 0; k < t->part_count; k++) {
        const uf_template_part *part = &t->parts[k];
        if (part->kind == UF_PART_ANYTHING)
            return false;
        if (part->kind == UF_PART_LITERAL)
            uf_text_bytes(out, part->text, part->length);
        else
            uf_text_add(out, values[part->field]);
    }
    return true;
}
