/* SPDX-License-Identifier: GPL-3.0-or-later */
#include <math.h>

#include "cli/cli.h"
#include "run/optics.h"

enum { MOST_FILES = 16 };

/* Options that are settings under another spelling: one place says which. */
typedef struct setting_option {
    const char *name, *section, *key, *help;
} setting_option;

static const setting_option setting_options[] = {
    {"wavelength-nm", "light", "wavelength_nm", "vacuum wavelength of the excitation"},
    {"polarization", "light", "polarization", "s, p or mixed"},
    {"geometry", "interface", "geometry", "objective or prism"},
    {"substrate", "interface", "substrate", "coverglass, bk7 or fused-silica, or:"},
    {"substrate-n", "interface", "substrate_n", "index of the substrate"},
    {"medium", "interface", "medium", "water, culture-medium or pbs, or:"},
    {"medium-n", "interface", "medium_n", "index of the medium in the gap"},
    {"temperature-c", "interface", "temperature_c", "temperature of a medium given by name (37)"},
    {"cell-n", "interface", "cell_n", "index of the cell (1.37)"},
    {"cell-n-sd", "interface", "cell_n_sd", "1 sigma of it (0.01)"},
    {"coating-n", "interface", "coating_n", "index of a thin coating"},
    {"coating-nm", "interface", "coating_nm", "its thickness"},
    {"angle-deg", "interface", "angle_deg", "angle of incidence from the normal"},
    {"angle-n", "interface", "angle_n", "index the angle is quoted in (substrate_n)"},
    {"angle-sd-deg", "interface", "angle_sd_deg", "1 sigma of the angle"},
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

/* A length in nm within what makes sense, NaN when the option was not given. */
static uf_status length_of(const char *option, const char *text, const char *example, double *value, uf_error *error)
{
    *value = (double)NAN;
    if (!text || (uf_parse_number(text, value) && *value >= 0.01 && *value <= 5000))
        return UF_OK;
    return uf_fail(error, UF_USAGE, "--%s %.40s: expected nanometres (0.01 to 5000), like --%s %s", option, text,
                   option, example);
}

enum { OWN_OPTIONS = 5, OPTIONS = OWN_OPTIONS + SETTING_OPTIONS };

typedef struct optics_arguments {
    const char *instruments[MOST_FILES], *values[SETTING_OPTIONS];
    const char *for_depth, *for_agreement, *plot;
    int instrument_count;
    bool json;
} optics_arguments;

static void list_options(optics_arguments *a, uf_option *options)
{
    const uf_option own[OWN_OPTIONS] = {
        {"instrument", 'i', "FILE", "facts about the bench; may be repeated", NULL, NULL, a->instruments,
         &a->instrument_count, MOST_FILES},
        {"for-depth-nm", 0, "D", "which angle gives this 1/e depth?", &a->for_depth, NULL, NULL, NULL, 0},
        {"for-agreement-nm", 0, "X", "at which angles is an exponential right to X nm?", &a->for_agreement, NULL,
         NULL, NULL, 0},
        {"plot", 0, "FILE.png", "depth against angle, and the decay curves", &a->plot, NULL, NULL, NULL, 0},
        {"json", 0, NULL, "one JSON object instead of words", NULL, &a->json, NULL, NULL, 0}};
    for (int k = 0; k < OWN_OPTIONS; k++)
        options[k] = own[k];
    for (int k = 0; k < SETTING_OPTIONS; k++)
        options[OWN_OPTIONS + k] =
            (uf_option){setting_options[k].name, 0, "X", setting_options[k].help, &a->values[k], NULL, NULL, NULL, 0};
}

static int command_optics(int argc, char **argv)
{
    optics_arguments a = {0};
    uf_option options[OPTIONS];
    uf_optics_request request = {0};
    const char *operand[1];
    int operand_count;
    bool help;
    uf_error error;
    uf_settings *settings = NULL;
    uf_text out = {0};
    list_options(&a, options);
    uf_status status = uf_options_parse(argc, argv, options, OPTIONS, operand, &operand_count, 0, &help, &error);
    if (status == UF_OK && help)
        return uf_help_print(&uf_command_optics, options, OPTIONS, NULL);
    if (status == UF_OK)
        status = length_of("for-depth-nm", a.for_depth, "80", &request.for_depth_nm, &error);
    if (status == UF_OK)
        status = length_of("for-agreement-nm", a.for_agreement, "2", &request.for_agreement_nm, &error);
    if (status == UF_OK)
        status = uf_read_settings(a.instruments, a.instrument_count, NULL, 0, &settings, &error);
    if (status == UF_OK)
        status = apply(settings, a.values, &error);
    request.settings = settings;
    request.as_json = a.json;
    request.plot_path = a.plot;
    if (status == UF_OK)
        status = uf_optics_report(&request, &out, &error);
    int exit_status = status == UF_OK ? uf_print_all(&out) : uf_report_error(&error);
    uf_settings_free(&settings);
    uf_text_free(&out);
    return exit_status;
}

const uf_command uf_command_optics = {
    "optics",
    "[-i INSTRUMENT] [options]",
    "numbers of an evanescent set-up",
    "Critical angles against medium and cell, depth of the evanescent field, intensities, what an\n"
    "exponential makes of a gap under a cell, and which angle to set for a wanted depth. Options\n"
    "override the instrument file.",
    "  underfoot optics --wavelength-nm 488 --substrate coverglass --medium culture-medium \\\n"
    "      --objective-na 1.49 --for-depth-nm 80",
    command_optics};
