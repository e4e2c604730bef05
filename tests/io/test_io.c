/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Files in and out. Run from the top of the repository; pixel values are compared with tifffile's and
 * libtiff's in test_images.py. */
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <setjmp.h>

#include <cmocka.h>

#include <dirent.h>
#include <math.h>
#include <signal.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/resource.h>
#include <sys/stat.h>
#include <unistd.h>

#include "io/csv.h"
#include "io/image_encode.h"
#include "io/image_file.h"
#include "io/input.h"
#include "io/output.h"

#define COUNT_OF(array) (sizeof(array) / sizeof(array)[0])

/* ---- a folder for each test ---------------------------------------------------------------- */

static char folder[64];
static uf_error error;
static uf_work work;

static int set_up(void **state)
{
    (void)state;
    (void)snprintf(folder, sizeof folder, "/tmp/underfoot-io-XXXXXX");
    error = (uf_error){0};
    return mkdtemp(folder) ? 0 : -1;
}

static int tear_down(void **state)
{
    char command[128];
    (void)state;
    uf_arena_free(&work.arena);
    (void)snprintf(command, sizeof command, "rm -rf '%s'", folder);
    return system(command);
}

static const char *inside(const char *name)
{
    static char paths[4][512];
    static int next;
    char *path = paths[next++ % 4];
    (void)snprintf(path, sizeof paths[0], "%s/%s", folder, name);
    return path;
}

static void put_file(const char *path, const void *bytes, size_t count)
{
    FILE *file = fopen(path, "wb");
    assert_non_null(file);
    assert_int_equal(fwrite(bytes, 1, count, file), count);
    assert_int_equal(fclose(file), 0);
}

static void assert_file_is(const char *path, const char *expected)
{
    uf_text text = {0};
    assert_int_equal(uf_input_read(&text, path, 1 << 20, &error), UF_OK);
    assert_string_equal(text.bytes, expected);
    uf_text_free(&text);
}

static void assert_says(const char *fragment)
{
    if (!strstr(error.text, fragment))
        fail_msg("\"%s\" does not say \"%s\"", error.text, fragment);
    assert_null(strchr(error.text, '\n'));
}

/* Entries of a folder beside "." and "..". */
static int entries_of(const char *path)
{
    int count = -2;
    DIR *directory = opendir(path);
    assert_non_null(directory);
    while (readdir(directory))
        count++;
    closedir(directory);
    return count;
}

/* ---- input ---------------------------------------------------------------------------------- */

static void reads_a_file_whole(void **state)
{
    (void)state;
    uf_text text = {0};
    char *long_text = malloc(50001);
    assert_non_null(long_text);
    for (int k = 0; k < 50000; k++)
        long_text[k] = (char)('a' + k % 23);
    long_text[50000] = '\0';
    put_file(inside("long"), long_text, 50000);
    assert_int_equal(uf_input_read(&text, inside("long"), 50000, &error), UF_OK);
    assert_int_equal(text.length, 50000);
    assert_string_equal(text.bytes, long_text);
    put_file(inside("empty"), "", 0);
    assert_int_equal(uf_input_read(&text, inside("empty"), 10, &error), UF_OK);
    assert_int_equal(text.length, 0);
    assert_string_equal(text.bytes, "");
    uf_text_free(&text);
    free(long_text);
}

static void refuses_what_is_no_file(void **state)
{
    (void)state;
    uf_text text = {0};
    put_file(inside("eleven"), "hello world", 11);
    assert_int_equal(uf_input_read(&text, inside("eleven"), 10, &error), UF_INPUT);
    assert_says("larger than 10 bytes");
    assert_null(text.bytes);
    assert_int_equal(uf_input_read(&text, folder, 10, &error), UF_INPUT);
    assert_says("is a folder");
    /* A pipe without a writer would hang a plain open. */
    assert_int_equal(mkfifo(inside("pipe"), 0600), 0);
    assert_int_equal(uf_input_read(&text, inside("pipe"), 10, &error), UF_INPUT);
    assert_says("is a pipe");
    assert_int_equal(uf_input_read(&text, "/dev/zero", 10, &error), UF_INPUT);
    assert_says("is a device");
    assert_int_equal(uf_input_read(&text, inside("absent"), 10, &error), UF_INPUT);
    assert_says("absent: cannot be read (No such file or directory)");
}

/* Against the test vectors of xxHash 0.8 (XXH3_64bits, seed 0; from memory for the empty input). */
static void fingerprints_bytes(void **state)
{
    (void)state;
    assert_true(uf_fingerprint("", 0) == 0x2d06800538d394c2u);
    assert_true(uf_fingerprint("near", 4) != uf_fingerprint("wide", 4));
}

/* Read through a buffer smaller than the file, against the same bytes in one go. */
static void fingerprints_a_file(void **state)
{
    (void)state;
    unsigned char bytes[10007], buffer[389];
    int descriptor;
    uint64_t size, fingerprint;
    for (size_t k = 0; k < sizeof bytes; k++)
        bytes[k] = (unsigned char)(k * k + 7 * k);
    put_file(inside("bytes"), bytes, sizeof bytes);
    assert_int_equal(uf_input_open(inside("bytes"), &descriptor, &size, &error), UF_OK);
    assert_int_equal(size, sizeof bytes);
    assert_int_equal(
        uf_input_fingerprint(descriptor, "bytes", buffer, sizeof buffer, &fingerprint, &error), UF_OK);
    assert_true(fingerprint == uf_fingerprint(bytes, sizeof bytes));
    close(descriptor);
}

/* ---- CSV ------------------------------------------------------------------------------------ */

/* Against RFC 4180, section 2, rules 5 to 7. */
static void quotes_fields(void **state)
{
    (void)state;
    static const char *const cases[][2] = {
        {"", ""},
        {"plain words", "plain words"},
        {"a,b", "\"a,b\""},
        {"12\" dish", "\"12\"\" dish\""},
        {"\"", "\"\"\"\""},
        {"two\nlines", "\"two\nlines\""},
        {"carriage\rreturn", "\"carriage\rreturn\""},
        {" leading", "\" leading\""},
        {"trailing\t", "\"trailing\t\""},
        {"\xc2\xb5m", "\xc2\xb5m"},
    };
    for (size_t k = 0; k < COUNT_OF(cases); k++) {
        uf_text text = {0};
        uf_csv_field(&text, cases[k][0]);
        uf_text_add(&text, "");
        assert_string_equal(text.bytes, cases[k][1]);
        uf_text_free(&text);
    }
}

typedef struct row {
    double gap_nm;
    int cell;
    const char *reason;
} row;

static void writes_rows(void **state)
{
    (void)state;
    static const uf_column columns[] = {{"cell", UF_COLUMN_WHOLE, offsetof(row, cell), "."},
                                        {"reason", UF_COLUMN_TEXT, offsetof(row, reason), "."},
                                        {"gap_nm", UF_COLUMN_REAL, offsetof(row, gap_nm), "."}};
    static const uf_table table = {"cells", ".", columns, COUNT_OF(columns)};
    const row one = {2.385, 7, "cut, and dim"}, two = {NAN, -3, NULL};
    uf_text text = {0};
    uf_csv_header(&text, &table);
    uf_csv_row(&text, &table, "P1/A01/3", &one);
    uf_csv_row(&text, &table, "P1,2/A01", &two);
    assert_int_equal(uf_text_check(&text, "a table", &error), UF_OK);
    assert_string_equal(text.bytes, "field_id,cell,reason,gap_nm\n"
                                    "P1/A01/3,7,\"cut, and dim\",2.385\n"
                                    "\"P1,2/A01\",-3,,\n");
    uf_text_free(&text);
}

/* ---- output --------------------------------------------------------------------------------- */

static void writes_and_replaces(void **state)
{
    (void)state;
    uf_output output = {0};
    assert_int_equal(uf_output_open(&output, inside("a/b//c/"), &error), UF_OK);
    assert_int_equal(uf_output_write(&output, NULL, "cells.csv", "one\n", 4, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, NULL, "cells.csv", "two\n", 4, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, "gap", "f.tif", "three", 5, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, "gap", "empty", NULL, 0, &error), UF_OK);
    assert_file_is(inside("a/b/c/cells.csv"), "two\n");
    assert_file_is(inside("a/b/c/gap/f.tif"), "three");
    assert_file_is(inside("a/b/c/gap/empty"), "");
    /* Nothing beside them: no temporary name is left. */
    assert_int_equal(entries_of(inside("a/b/c")), 2);
    assert_int_equal(entries_of(inside("a/b/c/gap")), 2);
    uf_output_close(&output);
    uf_output_close(&output);
    assert_null(output.path);
}

static void removes(void **state)
{
    (void)state;
    uf_output output = {0};
    assert_int_equal(uf_output_open(&output, folder, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, "gap", "f.tif", "x", 1, &error), UF_OK);
    assert_int_equal(uf_output_remove(&output, "gap", "f.tif", &error), UF_OK);
    assert_int_equal(entries_of(inside("gap")), 0);
    assert_int_equal(uf_output_remove(&output, "gap", "f.tif", &error), UF_OK);
    assert_int_equal(uf_output_remove(&output, "absent", "f.tif", &error), UF_OK);
    assert_int_equal(uf_output_remove(&output, NULL, "gap", &error), UF_OUTPUT);
    assert_says("/gap: cannot be removed");
    uf_output_close(&output);
}

static void refuses_a_file_as_folder(void **state)
{
    (void)state;
    uf_output output = {0};
    put_file(inside("file"), "x", 1);
    assert_int_equal(uf_output_open(&output, inside("file"), &error), UF_OUTPUT);
    assert_says("file: cannot be used as output folder (Not a directory)");
    assert_int_equal(uf_output_open(&output, inside("file/below"), &error), UF_OUTPUT);
    assert_int_equal(uf_output_open(&output, "", &error), UF_OUTPUT);
    assert_says("is empty");
    assert_int_equal(output.open, 0);
    uf_output_close(&output);
}

/* Neither a folder, nor a result, nor a temporary name that is a link leads out of the output. */
static void follows_no_link(void **state)
{
    (void)state;
    uf_output output = {0};
    assert_int_equal(mkdir(inside("elsewhere"), 0700), 0);
    put_file(inside("elsewhere/kept"), "kept", 4);
    assert_int_equal(uf_output_open(&output, inside("out"), &error), UF_OK);
    assert_int_equal(symlink(inside("elsewhere"), inside("out/gap")), 0);
    assert_int_equal(uf_output_write(&output, "gap", "f.tif", "x", 1, &error), UF_OUTPUT);
    assert_says("/gap/f.tif: cannot be written");
    assert_int_equal(uf_output_remove(&output, "gap", "kept", &error), UF_OUTPUT);
    assert_int_equal(symlink(inside("elsewhere/kept"), inside("out/cells.csv")), 0);
    assert_int_equal(symlink(inside("elsewhere/kept"), inside("out/.cells.csv.part")), 0);
    assert_int_equal(uf_output_write(&output, NULL, "cells.csv", "new", 3, &error), UF_OK);
    assert_file_is(inside("out/cells.csv"), "new");
    assert_file_is(inside("elsewhere/kept"), "kept");
    assert_int_equal(entries_of(inside("elsewhere")), 1);
    uf_output_close(&output);
}

/* A limit on the size of files stands in for a full disk: the first part is written, then write fails. */
static void leaves_the_old_file_when_the_disk_is_full(void **state)
{
    (void)state;
    uf_output output = {0};
    struct rlimit before, small;
    static char large[8192];
    assert_int_equal(uf_output_open(&output, folder, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, NULL, "cells.csv", "old", 3, &error), UF_OK);
    assert_int_equal(getrlimit(RLIMIT_FSIZE, &before), 0);
    small = before;
    small.rlim_cur = 4096;
    (void)signal(SIGXFSZ, SIG_IGN);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &small), 0);
    uf_status status = uf_output_write(&output, NULL, "cells.csv", large, sizeof large, &error);
    assert_int_equal(setrlimit(RLIMIT_FSIZE, &before), 0);
    assert_int_equal(status, UF_OUTPUT);
    assert_says("/cells.csv: cannot be written (File too large); nothing was replaced: ");
    assert_file_is(inside("cells.csv"), "old");
    assert_int_equal(entries_of(folder), 1);
    uf_output_close(&output);
}

static void refuses_what_cannot_be_replaced(void **state)
{
    (void)state;
    uf_output output = {0};
    char name[251];
    memset(name, 'n', 250);
    name[250] = '\0';
    assert_int_equal(uf_output_open(&output, folder, &error), UF_OK);
    assert_int_equal(uf_output_write(&output, NULL, name, "x", 1, &error), UF_OUTPUT);
    assert_says("File name too long");
    name[249] = '\0';
    assert_int_equal(uf_output_write(&output, NULL, name, "x", 1, &error), UF_OK);
    assert_int_equal(mkdir(inside("taken"), 0700), 0);
    assert_int_equal(uf_output_write(&output, NULL, "taken", "x", 1, &error), UF_OUTPUT);
    assert_says("/taken: cannot be written");
    assert_int_equal(entries_of(folder), 2);
    uf_output_close(&output);
}

static void assert_key(const char *key, const char *name)
{
    uf_text text = {0};
    uf_output_key(&text, key);
    assert_string_equal(text.bytes, name);
    uf_text_free(&text);
}

static void encodes_keys(void **state)
{
    (void)state;
    assert_key("A01_f-3", "A01_f-3");
    assert_key("P1/A01/3", "P1=2FA01=2F3");
    assert_key("day 1.tif", "day=201.tif");
    assert_key(".hidden", "=2Ehidden");
    assert_key("..", "=2E=2E");
    assert_key("end.", "end=2E");
    assert_key("=41", "=3D41");
    assert_key("\xc2\xb5m\n", "=C2=B5m=0A");
    assert_key("", "=");
}

/* Long keys that differ in their last letter only, in plain letters and in encoded ones. */
static void shortens_long_keys(void **state)
{
    (void)state;
    static const char *const units[] = {"a", "/", "a/", "\xc2\xb5"};
    for (size_t k = 0; k < COUNT_OF(units); k++) {
        uf_text key = {0}, names[4] = {{0}};
        while (key.length < 600)
            uf_text_add(&key, units[k]);
        for (int n = 0; n < 4; n++) {
            key.bytes[key.length - 1] = (char)("XYX/"[n]);
            uf_output_key(&names[n], key.bytes);
            assert_true(names[n].length <= 200 && names[n].length > 195);
            assert_null(strchr(names[n].bytes, '/'));
        }
        assert_string_equal(names[0].bytes, names[2].bytes);
        assert_string_not_equal(names[0].bytes, names[1].bytes);
        assert_string_not_equal(names[0].bytes, names[3].bytes);
        for (int n = 0; n < 4; n++)
            uf_text_free(&names[n]);
        uf_text_free(&key);
    }
}

/* The longest key that is not shortened, and the first that is. */
static void shortens_no_sooner_than_needed(void **state)
{
    (void)state;
    char key[202];
    uf_text text = {0};
    memset(key, 'k', sizeof key);
    key[200] = '\0';
    assert_key(key, key);
    key[200] = 'k';
    key[201] = '\0';
    uf_output_key(&text, key);
    assert_int_equal(text.length, 200);
    assert_non_null(strstr(text.bytes, "k=h"));
    uf_text_free(&text);
}

/* ---- images that must be refused ---------------------------------------------------------------- */

/* What each file of fixtures/images is refused for. */
static const char *const refused[][2] = {
    {"empty.tif", "empty.tif: is empty (0 bytes)"},
    {"text.tif", "text.tif: is not a TIFF file (it begins with the bytes 6E 65 61 72)"},
    {"cut-in-header.tif", "page 1: cannot be read (libtiff: "},
    {"cut-after-header.tif", "page 1: cannot be read (libtiff: "},
    {"strip-beyond-end.tif", "strip 2 of 2 lies beyond the end of the file (222 bytes)"},
    {"strip-count-too-large.tif", "strip 2 of 2 lies beyond the end of the file (222 bytes)"},
    {"strip-count-too-small.tif", "strip 2 of 2 promises 42 bytes of pixels, more than its 5 stored"},
    {"strip-missing.tif", "strip 2 of 2 has no stored pixels"},
    {"sparse-strip.tif", "strip 2 of 2 has no stored pixels"},
    {"huge-claim.tif", "claims 100000 x 100000 pixels, more than the limit of 1000000000"},
    {"huge-tile.tif", "has strips or tiles of an impossible size"},
    {"no-width.tif", "cannot be read (libtiff: "},
    {"page-loop.tif", "the chain of pages is broken (libtiff: "},
    {"page-nowhere.tif", "the chain of pages is broken (libtiff: "},
    {"deflate-garbage.tif", "cannot be decoded (libtiff: "},
    {"lzw-garbage.tif", "cannot be decoded (libtiff: "},
    {"jpeg.tif", "is compressed with JPEG (scheme 7), expected none, LZW"},
    {"rgb.tif", "is colour (RGB) with 3 values a pixel, expected grey with one; save the raw grey image"},
    {"palette.tif", "is colour (palette) with 1 value a pixel"},
    {"two-samples.tif", "is grey with 2 values a pixel"},
    {"white-is-zero.tif", "is grey with 0 as white, expected 0 as black"},
    {"turned.tif", "(orientation 6), expected row 0 on top"},
    {"one-bit.tif", "holds 1-bit unsigned values, expected 8- or 16-bit unsigned"},
    {"signed-16.tif", "holds 16-bit signed values"},
    {"unsigned-32.tif", "holds 32-bit unsigned values"},
    {"float-64.tif", "holds 64-bit floating-point values"},
    {"complex-64.tif", "holds 64-bit complex values"},
    {"not-a-number.tif", "the value at x = 4, y = 3 is not a number"},
    {"infinite.tif", "the value at x = 4, y = 3 is infinite"},
};

static void refuses_every_bad_image(void **state)
{
    (void)state;
    for (size_t k = 0; k < COUNT_OF(refused); k++) {
        char path[256];
        uf_plane plane;
        uf_image_info info;
        uf_arena_mark mark = uf_arena_now(&work.arena);
        (void)snprintf(path, sizeof path, "fixtures/images/%s", refused[k][0]);
        error = (uf_error){0};
        if (uf_image_read(&work, path, 0, NULL, &plane, &info, &error) != UF_INPUT)
            fail_msg("%s was not refused", path);
        assert_says(path);
        assert_says(refused[k][1]);
        assert_null(plane.data);
        uf_arena_mark after = uf_arena_now(&work.arena);
        assert_true(after.block == mark.block && after.used == mark.used);
    }
    /* README.md and the files above: none is forgotten. */
    assert_int_equal(entries_of("fixtures/images"), COUNT_OF(refused) + 1);
}

/* With a limit that lets it through, the claim must fail against the bytes in the file. */
static void believes_no_claim_beyond_the_bytes(void **state)
{
    (void)state;
    const uf_image_limits limits = {1e12};
    uf_plane plane;
    assert_int_equal(
        uf_image_read(&work, "fixtures/images/huge-claim.tif", 0, &limits, &plane, NULL, &error), UF_INPUT);
    assert_says("lies beyond the end of the file (142 bytes)");
    assert_int_equal(
        uf_image_read(&work, "fixtures/images/huge-tile.tif", 0, &limits, &plane, NULL, &error), UF_INPUT);
    assert_says("tile 1 of 1 promises 8585740800 bytes of pixels, more than its 84 stored");
}

/* ---- our own images ------------------------------------------------------------------------------ */

static uf_plane counts_of(int width, int height)
{
    uf_plane plane;
    assert_int_equal(uf_plane_take(&work, width, height, &plane, &error), UF_OK);
    for (int y = 0; y < height; y++)
        for (int x = 0; x < width; x++)
            uf_plane_row(plane, y)[x] = (float)((x * 7919 + y * 104729) % 65536);
    return plane;
}

static void put_counts_as(const char *path, uf_plane plane)
{
    uf_text file = {0};
    assert_int_equal(uf_encode_count_tiff(&file, plane, 0.1083, NULL, &error), UF_OK);
    put_file(path, file.bytes, file.length);
    uf_text_free(&file);
}

static void reads_what_it_wrote(void **state)
{
    (void)state;
    static const int sizes[][2] = {{1, 1}, {1, 997}, {997, 1}, {131, 257}, {40000, 3}};
    for (size_t k = 0; k < COUNT_OF(sizes); k++) {
        uf_plane made = counts_of(sizes[k][0], sizes[k][1]), read;
        uf_image_info info;
        put_counts_as(inside("counts.tif"), made);
        assert_int_equal(uf_image_read(&work, inside("counts.tif"), 0, NULL, &read, &info, &error), UF_OK);
        assert_int_equal(read.width, made.width);
        assert_int_equal(read.height, made.height);
        assert_memory_equal(read.data, made.data,
                            (size_t)made.width * (size_t)made.height * sizeof(float));
        assert_int_equal(info.bits, 16);
        assert_int_equal(info.pages, 1);
        assert_true(info.pixel_size_x_um == 0.1083 && info.pixel_size_y_um == 0.1083);
    }
}

static void names_both_page_numbers(void **state)
{
    (void)state;
    uf_plane plane;
    put_counts_as(inside("one.tif"), counts_of(5, 3));
    assert_int_equal(uf_image_read(&work, inside("one.tif"), 4, NULL, &plane, NULL, &error), UF_INPUT);
    assert_says("has 1 page, page 5 was asked for (counted from 1)");
    assert_int_equal(uf_image_read(&work, inside("one.tif"), -1, NULL, &plane, NULL, &error), UF_INPUT);
}

static void holds_to_the_pixel_limit(void **state)
{
    (void)state;
    const uf_image_limits enough = {15}, too_few = {14};
    uf_plane plane;
    put_counts_as(inside("15.tif"), counts_of(5, 3));
    assert_int_equal(uf_image_read(&work, inside("15.tif"), 0, &enough, &plane, NULL, &error), UF_OK);
    assert_int_equal(uf_image_read(&work, inside("15.tif"), 0, &too_few, &plane, NULL, &error), UF_INPUT);
    assert_says("claims 5 x 3 pixels, more than the limit of 14");
}

/* Every shorter file is an error or, where only the end of a tag's value is gone, the same pixels; every
 * file with one byte changed is anything but a crash. Under the address sanitizer this is the test. */
static void survives_cuts_and_changed_bytes(void **state)
{
    (void)state;
    uf_plane made = counts_of(7, 5), read;
    uf_text file = {0};
    assert_int_equal(uf_encode_count_tiff(&file, made, 0.1083, NULL, &error), UF_OK);
    int refusals = 0;
    for (size_t k = 0; k < file.length; k++) {
        put_file(inside("cut.tif"), file.bytes, k);
        uf_status status = uf_image_read(&work, inside("cut.tif"), 0, NULL, &read, NULL, &error);
        if (status == UF_OK)
            assert_memory_equal(read.data, made.data, 35 * sizeof(float));
        refusals += status == UF_INPUT;
        char kept = file.bytes[k];
        static const unsigned char changes[] = {0x01, 0x80, 0xff};
        for (size_t c = 0; c < COUNT_OF(changes); c++) {
            file.bytes[k] = (char)((unsigned char)kept ^ changes[c]);
            put_file(inside("changed.tif"), file.bytes, file.length);
            status = uf_image_read(&work, inside("changed.tif"), 0, NULL, &read, NULL, &error);
            assert_true(status == UF_OK || status == UF_INPUT);
            uf_arena_back(&work.arena, (uf_arena_mark){0});
            made = counts_of(7, 5);
        }
        file.bytes[k] = kept;
    }
    assert_true(refusals > (int)file.length * 3 / 4);
    uf_text_free(&file);
}

static void refuses_counts_that_do_not_fit(void **state)
{
    (void)state;
    static const float wrong[] = {-0.6f, 65535.6f, NAN, INFINITY};
    for (size_t k = 0; k < COUNT_OF(wrong); k++) {
        uf_text file = {0};
        uf_plane plane = counts_of(5, 4);
        uf_plane_row(plane, 2)[3] = wrong[k];
        assert_int_equal(uf_encode_count_tiff(&file, plane, NAN, NULL, &error), UF_USAGE);
        assert_says("x = 3, y = 2");
        uf_text_free(&file);
    }
}

/* Processors differ in the NaN they make; the file must not. */
static void writes_one_kind_of_nan(void **state)
{
    (void)state;
    static const uint32_t patterns[] = {0x7fc00000u, 0xffc00000u, 0x7f800001u, 0xffffffffu};
    uf_text first = {0};
    for (size_t k = 0; k < COUNT_OF(patterns); k++) {
        uf_text file = {0};
        uf_plane plane = counts_of(31, 17);
        memcpy(&uf_plane_row(plane, 11)[5], &patterns[k], sizeof patterns[k]);
        assert_int_equal(uf_encode_float_tiff(&file, plane, 0.1, "gap", &error), UF_OK);
        if (k == 0) {
            first = file;
            continue;
        }
        assert_int_equal(file.length, first.length);
        assert_memory_equal(file.bytes, first.bytes, first.length);
        uf_text_free(&file);
    }
    uf_text_free(&first);
}

/* libpng refuses the width, and comes back through its longjmp. */
static void survives_an_error_inside_libpng(void **state)
{
    (void)state;
    uint8_t pixels[12] = {0, 1, 2};
    uf_indexed image = {.data = pixels, .width = 0, .height = 3, .colours = 3};
    uf_text file = {0};
    assert_int_equal(uf_encode_indexed_png(&file, &image, &error), UF_OUTPUT);
    assert_says("libpng: ");
    uf_text_free(&file);
    image.width = 4;
    assert_int_equal(uf_encode_indexed_png(&file, &image, &error), UF_OK);
    uf_text_free(&file);
}

#define TEST(name) cmocka_unit_test_setup_teardown(name, set_up, tear_down)

int main(void)
{
    const struct CMUnitTest tests[] = {
        TEST(reads_a_file_whole),
        TEST(refuses_what_is_no_file),
        TEST(fingerprints_bytes),
        TEST(fingerprints_a_file),
        TEST(quotes_fields),
        TEST(writes_rows),
        TEST(writes_and_replaces),
        TEST(removes),
        TEST(refuses_a_file_as_folder),
        TEST(follows_no_link),
        TEST(leaves_the_old_file_when_the_disk_is_full),
        TEST(refuses_what_cannot_be_replaced),
        TEST(encodes_keys),
        TEST(shortens_long_keys),
        TEST(shortens_no_sooner_than_needed),
        TEST(refuses_every_bad_image),
        TEST(believes_no_claim_beyond_the_bytes),
        TEST(reads_what_it_wrote),
        TEST(names_both_page_numbers),
        TEST(holds_to_the_pixel_limit),
        TEST(survives_cuts_and_changed_bytes),
        TEST(refuses_counts_that_do_not_fit),
        TEST(writes_one_kind_of_nan),
        TEST(survives_an_error_inside_libpng),
    };
    return cmocka_run_group_tests(tests, NULL, NULL);
}
