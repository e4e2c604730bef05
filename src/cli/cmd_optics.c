/* SPDX-License-Identifier: GPL-3.0-or-later */
#include "cli/cli.h"
#include "run/optics.h"

enum { MOST_FILES = 16 };

/* Options that are settings under another spelling: one place says which. */
typedef struct setting_option {
    const char *name, *section, *key, *help;
} setting_option;

static const setting_option setting_options[] = {
    {"wavelength-nm", "light", "wavelength_nm", "vacuum wavelength of the excitation"},
    {"substrate-n", "interface", "substrate_n", "index of the substrate"},
    {"medium-n", "interface", "medium_n", "index of the medium in the gap"},
    {"cell-n", "interface", "cell_n", "index of the cell (1.37)"},
    {"angle-deg", "interface", "angle_deg", "angle of incidence from the normal"},
    {"angle-n", "interface", "angle_n", "index the angle is quoted in (substrate_n)"},
    {"na-effective", "interface", "na_effective", "n sin(angle), instead of the angle"},
    {"depth-nm", "interface", "depth_nm", "measured 1/e depth, instead of the angle"},
    {"objective-na", "interface", "objective_na", "numerical aperture of the objective"},
};
enum { SETTING_OPTIONS = sizeof setting_options / sizeof setting_options[0] };

static uf_status apply(uf_settings *settings, const char *const *values, uf_error *error)
{
    uf_status status = UF_OK;
    for (int k = 0; status == UF_OK && k < SETTING_OPTIONS; k++)
        if (values[k])
            status = uf_settings_set(settings, setting_options[k].section, setting_options[k].key, values[k], error);
    return status;
}

static int command_optics(int argc, char **argv)
{
    const char *instruments[MOST_FILES], *values[SETTING_OPTIONS] = {0}, *operand[1];
    int instrument_count = 0, operand_count;
    bool json = false, help;
    uf_option options[SETTING_OPTIONS + 2] = {
        {"instrument", 'i', "FILE", "facts about the bench; may be repeated", NULL, NULL, instruments,
         &instrument_count, MOST_FILES},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &json, NULL, NULL, 0}};
    for (int k = 0; k < SETTING_OPTIONS; k++)
        options[k + 2] =
            (uf_option){setting_options[k].name, 0, "X", setting_options[k].help, &values[k], NULL, NULL, NULL, 0};
    uf_error error;
    uf_settings *settings = NULL;
    uf_text out = {0};
    uf_status status =
        uf_options_parse(argc, argv, options, SETTING_OPTIONS + 2, operand, &operand_count, 0, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_optics, options, SETTING_OPTIONS + 2, NULL);
    if (status == UF_OK)
        status = uf_read_settings(instruments, instrument_count, NULL, 0, &settings, &error);
    if (status == UF_OK)
        status = apply(settings, values, &error);
    if (status == UF_OK)
        status = uf_optics_report(settings, json, &out, &error);
    int exit_status = status == UF_OK ? uf_print_all(&out) : uf_report_error(&error);
    uf_settings_free(&settings);
    uf_text_free(&out);
    return exit_status;
}

const uf_command uf_command_optics = {
    "optics",
    "[-i INSTRUMENT] [options]",
    "numbers of an evanescent set-up",
    "Critical angles against medium and cell, depth of the evanescent field, intensities, and what an\n"
    "exponential makes of a gap under a cell. Options override the instrument file.",
    "  underfoot optics --wavelength-nm 488 --substrate-n 1.518 --medium-n 1.337 --angle-deg 70",
    command_optics};
