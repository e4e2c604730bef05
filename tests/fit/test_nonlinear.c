/* SPDX-License-Identifier: GPL-3.0-or-later */
/* Nonlinear least squares against NIST StRD (Statistical Reference Datasets, nonlinear regression; certified to eleven
 * digits) from both starting points NIST gives, with our slopes and with differences, and against a closed form. */
#include <setjmp.h>
#include <stdarg.h>
#include <stddef.h>
#include <stdint.h>
#include <cmocka.h>

#include "fit/nonlinear.h"
#include "near.h"

#define COUNT_OF(array) (sizeof array / sizeof array[0])

/* ---- the models: value and slopes at x -------------------------------------------------------- */

static double misra1a(const double *b, double x)
{
    return b[0] * (1 - exp(-b[1] * x));
}

static void misra1a_slopes(const double *b, double x, double *s)
{
    s[0] = 1 - exp(-b[1] * x);
    s[1] = b[0] * x * exp(-b[1] * x);
}

/* BoxBOD has Misra1a's form. */
#define boxbod misra1a
#define boxbod_slopes misra1a_slopes

static double mgh17(const double *b, double x)
{
    return b[0] + b[1] * exp(-x * b[3]) + b[2] * exp(-x * b[4]);
}

static void mgh17_slopes(const double *b, double x, double *s)
{
    s[0] = 1;
    s[1] = exp(-x * b[3]);
    s[2] = exp(-x * b[4]);
    s[3] = -x * b[1] * s[1];
    s[4] = -x * b[2] * s[2];
}

static double eckerle4(const double *b, double x)
{
    double z = (x - b[2]) / b[1];
    return b[0] / b[1] * exp(-0.5 * z * z);
}

static void eckerle4_slopes(const double *b, double x, double *s)
{
    double z = (x - b[2]) / b[1], g = exp(-0.5 * z * z);
    s[0] = g / b[1];
    s[1] = b[0] * g * (z * z - 1) / (b[1] * b[1]);
    s[2] = b[0] * g * z / (b[1] * b[1]);
}

static double chwirut2(const double *b, double x)
{
    return exp(-b[0] * x) / (b[1] + b[2] * x);
}

static void chwirut2_slopes(const double *b, double x, double *s)
{
    double below = b[1] + b[2] * x, y = exp(-b[0] * x) / below;
    s[0] = -x * y;
    s[1] = -y / below;
    s[2] = -x * y / below;
}

/* ---- the data --------------------------------------------------------------------------------- */

static const double misra1a_data[][2] = {
    {10.07, 77.6},  {14.73, 114.9}, {17.94, 141.1}, {23.93, 190.8}, {29.61, 239.9}, {35.18, 289.0}, {40.02, 332.8},
    {44.82, 378.4}, {50.76, 434.8}, {55.05, 477.3}, {61.01, 536.8}, {66.4, 593.1},  {75.47, 689.1}, {81.78, 760.0}};

static const double mgh17_data[][2] = {
    {0.844, 0.0},   {0.908, 10.0},  {0.932, 20.0},  {0.936, 30.0},  {0.925, 40.0},  {0.908, 50.0},  {0.881, 60.0},
    {0.85, 70.0},   {0.818, 80.0},  {0.784, 90.0},  {0.751, 100.0}, {0.718, 110.0}, {0.685, 120.0}, {0.658, 130.0},
    {0.628, 140.0}, {0.603, 150.0}, {0.58, 160.0},  {0.558, 170.0}, {0.538, 180.0}, {0.522, 190.0}, {0.506, 200.0},
    {0.49, 210.0},  {0.478, 220.0}, {0.467, 230.0}, {0.457, 240.0}, {0.448, 250.0}, {0.438, 260.0}, {0.431, 270.0},
    {0.424, 280.0}, {0.42, 290.0},  {0.414, 300.0}, {0.411, 310.0}, {0.406, 320.0}};

static const double eckerle4_data[][2] = {
    {0.0001575, 400.0}, {0.0001699, 405.0}, {0.000235, 410.0},  {0.0003102, 415.0}, {0.0004917, 420.0},
    {0.000871, 425.0},  {0.0017418, 430.0}, {0.00464, 435.0},   {0.0065895, 436.5}, {0.0097302, 438.0},
    {0.0149002, 439.5}, {0.023731, 441.0},  {0.0401683, 442.5}, {0.0712559, 444.0}, {0.1264458, 445.5},
    {0.2073413, 447.0}, {0.2902366, 448.5}, {0.3445623, 450.0}, {0.3698049, 451.5}, {0.3668534, 453.0},
    {0.3106727, 454.5}, {0.2078154, 456.0}, {0.1164354, 457.5}, {0.0616764, 459.0}, {0.03372, 460.5},
    {0.0194023, 462.0}, {0.0117831, 463.5}, {0.0074357, 465.0}, {0.0022732, 470.0}, {0.00088, 475.0},
    {0.0004579, 480.0}, {0.0002345, 485.0}, {0.0001586, 490.0}, {0.0001143, 495.0}, {7.1e-05, 500.0}};

static const double boxbod_data[][2] = {{109.0, 1.0}, {149.0, 2.0}, {149.0, 3.0},
                                        {191.0, 5.0}, {213.0, 7.0}, {224.0, 10.0}};

static const double chwirut2_data[][2] = {
    {92.9, 0.5},   {57.1, 1.0},   {31.05, 1.75}, {11.5875, 3.75}, {8.025, 5.75},   {63.6, 0.875}, {21.4, 2.25},
    {14.25, 3.25}, {8.475, 5.25}, {63.8, 0.75},  {26.8, 1.75},    {16.4625, 2.75}, {7.125, 4.75}, {67.3, 0.625},
    {41.0, 1.25},  {21.15, 2.25}, {8.175, 4.25}, {81.5, 0.5},     {13.12, 3.0},    {59.9, 0.75},  {14.62, 3.0},
    {32.9, 1.5},   {5.44, 6.0},   {12.56, 3.0},  {5.44, 6.0},     {32.0, 1.5},     {13.95, 3.0},  {75.8, 0.5},
    {20.0, 2.0},   {10.42, 4.0},  {59.5, 0.75},  {21.67, 2.0},    {8.55, 5.0},     {62.0, 0.75},  {20.2, 2.25},
    {7.76, 3.75},  {3.75, 5.75},  {11.81, 3.0},  {54.7, 0.75},    {23.7, 2.5},     {11.55, 4.0},  {61.3, 0.75},
    {17.7, 2.5},   {8.74, 4.0},   {59.2, 0.75},  {16.3, 2.5},     {8.62, 4.0},     {81.0, 0.5},   {4.87, 6.0},
    {14.62, 3.0},  {81.7, 0.5},   {17.17, 2.75}, {81.3, 0.5},     {28.9, 1.75}};

typedef struct nist_set {
    const char *name;
    int parameters;
    double (*model)(const double *, double);
    void (*slopes)(const double *, double, double *);
    const double (*data)[2]; /* y, x */
    size_t rows;
    double starts[2][5], certified[5], sd[5], sum_of_squares, residual_sd;
} nist_set;

static const nist_set sets[] = {
    {"Misra1a",
     2,
     misra1a,
     misra1a_slopes,
     misra1a_data,
     COUNT_OF(misra1a_data),
     {{500.0, 0.0001}, {250.0, 0.0005}},
     {238.94212918, 0.00055015643181},
     {2.7070075241, 7.2668688436e-06},
     0.12455138894,
     0.1018787633},
    {"MGH17",
     5,
     mgh17,
     mgh17_slopes,
     mgh17_data,
     COUNT_OF(mgh17_data),
     {{50.0, 150.0, -100.0, 1.0, 2.0}, {0.5, 1.5, -1.0, 0.01, 0.02}},
     {0.37541005211, 1.9358469127, -1.4646871366, 0.01286753464, 0.022122699662},
     {0.0020723153551, 0.22031669222, 0.22175707739, 0.00044861358114, 0.00089471996575},
     5.4648946975e-05,
     0.0013970497866},
    {"Eckerle4",
     3,
     eckerle4,
     eckerle4_slopes,
     eckerle4_data,
     COUNT_OF(eckerle4_data),
     {{1.0, 10.0, 500.0}, {1.5, 5.0, 450.0}},
     {1.5543827178, 4.0888321754, 451.54121844},
     {0.015408051163, 0.046803020753, 0.046800518816},
     0.0014635887487,
     0.0067629245447},
    {"BoxBOD",
     2,
     boxbod,
     boxbod_slopes,
     boxbod_data,
     COUNT_OF(boxbod_data),
     {{1.0, 1.0}, {100.0, 0.75}},
     {213.80940889, 0.54723748542},
     {12.354515176, 0.10455993237},
     1168.0088766,
     17.088072423},
    {"Chwirut2",
     3,
     chwirut2,
     chwirut2_slopes,
     chwirut2_data,
     COUNT_OF(chwirut2_data),
     {{0.1, 0.01, 0.02}, {0.15, 0.008, 0.01}},
     {0.16657666537, 0.0051653291286, 0.012150007096},
     {0.03830328681, 0.00066621605126, 0.0015304234767},
     513.04802941,
     3.171713304},
};

static void residuals(void *context, const double *p, double *r)
{
    const nist_set *set = context;
    for (size_t k = 0; k < set->rows; k++)
        r[k] = set->model(p, set->data[k][1]) - set->data[k][0];
}

static void slopes(void *context, const double *p, double *j)
{
    const nist_set *set = context;
    for (size_t k = 0; k < set->rows; k++)
        set->slopes(p, set->data[k][1], j + k * (size_t)set->parameters);
}

static void check_set(const nist_set *set, int start, uf_residual_slopes *analytic, double digits_lost, int may_fail)
{
    uf_nonlinear problem = {set->parameters, set->rows, residuals, analytic, (void *)(uintptr_t)set};
    uf_nonlinear_fit fit;
    for (int k = 0; k < set->parameters; k++)
        fit.value[k] = set->starts[start][k];
    assert_int_equal(uf_nonlinear_solve(&problem, &fit, NULL), UF_OK);
    (void)printf("%s, start %d: %d steps\n", set->name, start + 1, fit.steps);
    if (!fit.converged && may_fail)
        return;
    assert_true(fit.converged);
    for (int k = 0; k < set->parameters; k++) {
        assert_near_rel(fit.value[k], set->certified[k], 1e-8 * digits_lost);
        assert_near_rel(fit.residual_sd * sqrt(fit.covariance[k][k]), set->sd[k], 1e-7 * digits_lost);
    }
    assert_near_rel(fit.sum_of_squares, set->sum_of_squares, 1e-9 * digits_lost);
    assert_near_rel(fit.residual_sd, set->residual_sd, 1e-9 * digits_lost);
}

/* Eight digits of the parameters, seven of their standard deviations, nine of the rest. The far starts of MGH17 and BoxBOD
 * lead into plains that damped steps do not leave: there the fit must say so, and never return another minimum. */
static void test_nist(void **state)
{
    (void)state;
    for (size_t k = 0; k < COUNT_OF(sets); k++)
        for (int start = 0; start < 2; start++)
            check_set(&sets[k], start, slopes, 1, !start && (sets[k].model == mgh17 || sets[k].data == boxbod_data));
}

/* The second start is as near as a user's guess; differences cost digits of the standard deviations. */
static void test_nist_by_differences(void **state)
{
    (void)state;
    for (size_t k = 0; k < COUNT_OF(sets); k++)
        check_set(&sets[k], 1, NULL, 100, 0);
}

/* A straight line's fit has a closed form, covariance included: x = -1, 0, 1, 2 with y = a + b x. */
static void line(void *context, const double *p, double *r)
{
    const double *y = context;
    for (int k = 0; k < 4; k++)
        r[k] = p[0] + p[1] * (k - 1) - y[k];
}

static void test_a_line_by_its_closed_form(void **state)
{
    (void)state;
    double y[] = {2.385, 3.1, 4.27, 4.905};
    uf_nonlinear problem = {2, 4, line, NULL, y};
    uf_nonlinear_fit fit = {.value = {0, 0}};
    assert_int_equal(uf_nonlinear_solve(&problem, &fit, NULL), UF_OK);
    assert_true(fit.converged);
    double mean = (y[0] + y[1] + y[2] + y[3]) / 4, slope = (-1.5 * y[0] - 0.5 * y[1] + 0.5 * y[2] + 1.5 * y[3]) / 5;
    assert_near_rel(fit.value[1], slope, 1e-8);
    assert_near_rel(fit.value[0], mean - 0.5 * slope, 1e-8);
    assert_near_rel(fit.covariance[1][1], 1.0 / 5, 1e-6);
    assert_near_rel(fit.covariance[0][0], 1.0 / 4 + 0.25 / 5, 1e-6);
    assert_near_rel(fit.covariance[0][1], -0.5 / 5, 1e-6);
}

static void nowhere(void *context, const double *p, double *r)
{
    (void)context;
    r[0] = r[1] = NAN * p[0];
}

static void test_no_number_is_no_fit(void **state)
{
    (void)state;
    uf_nonlinear problem = {1, 2, nowhere, NULL, NULL};
    uf_nonlinear_fit fit = {.value = {1}};
    assert_int_equal(uf_nonlinear_solve(&problem, &fit, NULL), UF_OK);
    assert_false(fit.converged);
}

int main(void)
{
    const struct CMUnitTest tests[] = {cmocka_unit_test(test_nist), cmocka_unit_test(test_nist_by_differences),
                                       cmocka_unit_test(test_a_line_by_its_closed_form),
                                       cmocka_unit_test(test_no_number_is_no_fit)};
    return cmocka_run_group_tests(tests, NULL, NULL);
}
