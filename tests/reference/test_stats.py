"""Statistics against scipy, numpy and (where installed) statsmodels, on irregular data."""
import ctypes

import numpy
import pytest
from scipy import optimize, stats

from probe import Error, LIBRARY, real

DOUBLE, INT, SIZE, UINT = ctypes.c_double, ctypes.c_int, ctypes.c_size_t, ctypes.c_uint
DOUBLES = ctypes.POINTER(DOUBLE)
DIFFERENCE, RATIO = 0, 1


def structure(name, fields):
    return type(name, (ctypes.Structure,), {"_fields_": [(n, t) for t, names in fields for n in names.split()]})


Arm = structure("Arm", [(DOUBLES, "values"), (SIZE, "count")])
Moments = structure("Moments", [(SIZE, "count"), (DOUBLE, "weight mean sd")])
Summary = structure("Summary", [(Moments, "moments"), (DOUBLE, "median mad")])
Contrast = structure("Contrast", [
    (INT, "scale"), (SIZE, "n_treated n_control"),
    (DOUBLE, "mean_treated mean_control sd_treated sd_control effect effect_low effect_high estimate standard_error "
             "t df p hedges_g hedges_g_low hedges_g_high"), (UINT, "notes")])
EffectSize = structure("EffectSize", [(DOUBLE, "g low high")])
BlockedRow = structure("BlockedRow", [(DOUBLE, "value"), (INT, "block group")])
Blocked = structure("Blocked", [(INT, "scale groups"), (ctypes.POINTER(SIZE), "counts"),
                                (DOUBLES, "means sds effects unscaled"), (DOUBLE, "residual_sd df"), (UINT, "notes")])
Many = structure("Many", [(DOUBLE, "t p_adjusted low high")])
RankTest = structure("RankTest", [(SIZE, "n_treated n_control"), (DOUBLE, "statistic expected sd p p_above p_below"),
                                  (INT, "exact"), (DOUBLE, "shift shift_low shift_high coverage"), (UINT, "notes")])
OneWay = structure("OneWay", [(SIZE, "count groups"), (DOUBLE, "ms_between ms_within df_between df_within f p r_squared "
                                                       "residual_sd group_size icc icc_signed icc_low icc_high"),
                              (UINT, "notes")])
NestedRow = structure("NestedRow", [(DOUBLE, "value"), (INT, "treatment replicate well")])
Components = structure("Components", [
    (SIZE, "cells wells replicates treatments"), (DOUBLE, "mean"), (DOUBLE * 3, "mean_square df"),
    (DOUBLE, "well_size replicate_well_size replicate_size"), (DOUBLE * 3, "variance variance_signed"),
    (DOUBLE, "icc_replicate icc_well design_effect effective_n"), (UINT, "notes")])
Share = structure("Share", [(DOUBLE, "share low high")])
DosePoint = structure("DosePoint", [(DOUBLE, "dose response")])
DoseFit = structure("DoseFit", [
    (INT, "status"), (UINT, "notes"), (SIZE, "points"), (INT, "doses"),
    (DOUBLE, "dose_min dose_max effect_f effect_p zero full log10_ec50 hill_slope zero_se full_se log10_ec50_se "
             "hill_slope_se bottom top"), (INT, "direction"), (DOUBLE, "ec50 ec50_low ec50_high rss df residual_sd misfit_p")])
Plan = structure("Plan", [(INT, "scale"), (DOUBLE, "detect power level"), (INT, "paired"), (DOUBLE, "variance variance_df")])


def values(array):
    return numpy.ascontiguousarray(array, float).ctypes.data_as(DOUBLES)


def arm(array):
    array = numpy.ascontiguousarray(array, float)
    made = Arm(array.ctypes.data_as(DOUBLES), len(array))
    made.keep = array
    return made


def run(name, *arguments):
    """Calls a function that takes an error last and returns a status."""
    error, function = Error(), getattr(LIBRARY, name)
    function.restype = INT
    assert function(*arguments, ctypes.byref(error)) == 0, error.text.decode()


def number(name, *arguments):
    function = getattr(LIBRARY, name)
    function.restype = DOUBLE
    return function(*arguments)


def close(got, expected, rel=1e-9, absolute=0):
    assert got == pytest.approx(expected, rel=rel, abs=absolute)


def drawn(seed, *sizes):
    rng = numpy.random.default_rng(seed)
    return [numpy.exp(rng.normal(3 + 0.2 * k, 0.3 + 0.1 * k, n)) for k, n in enumerate(sizes)]


# ---- distributions and summaries -----------------------------------------------------------------

@pytest.mark.parametrize("t,df,delta", [(2.385, 4, 1.1), (-0.7, 7.3, 0.4), (31.5, 5, 28), (0.2, 1, -2), (3.1, 240, 3),
                                        (-4.4, 18, -6.5), (12, 2.5, 0.3)])
def test_noncentral_t(t, df, delta):
    # scipy.stats.nct
    with numpy.errstate(all="ignore"):
        close(number("uf_noncentral_t_below", real(t), real(df), real(delta)), stats.nct.cdf(t, df, delta), 1e-7, 1e-10)


def test_summary_of_weighted_values():
    # numpy.average, and repeating values by whole weights for the median
    x, w = drawn(4, 37)[0], numpy.random.default_rng(5).integers(1, 6, 37).astype(float)
    s = Summary()
    run("uf_summarize", values(x), values(w), SIZE(37), ctypes.byref(s))
    close(s.moments.mean, numpy.average(x, weights=w), 1e-13)
    off = (w * (x - s.moments.mean) ** 2).sum()
    close(s.moments.sd, (off / (w.sum() - (w ** 2).sum() / w.sum())) ** 0.5, 1e-12)
    repeated = numpy.repeat(x, w.astype(int))
    close(s.median, numpy.median(repeated), 1e-14)
    close(s.mad, stats.median_abs_deviation(repeated), 1e-13)


# ---- contrasts -------------------------------------------------------------------------------------

@pytest.mark.parametrize("n,m", [(3, 3), (4, 9), (23, 5)])
@pytest.mark.parametrize("scale", [DIFFERENCE, RATIO])
def test_welch(n, m, scale):
    # scipy.stats.ttest_ind(equal_var=False); the interval of the difference from its own df
    x, y = drawn(n * 100 + m, n, m)
    LIBRARY.uf_welch.restype = Contrast
    c = LIBRARY.uf_welch(arm(x), arm(y), scale, real(0.95))
    a, b = (numpy.log(x), numpy.log(y)) if scale else (x, y)
    t, p = stats.ttest_ind(a, b, equal_var=False)
    parts = a.var(ddof=1) / n, b.var(ddof=1) / m
    df = sum(parts) ** 2 / (parts[0] ** 2 / (n - 1) + parts[1] ** 2 / (m - 1))
    half = stats.t.ppf(0.975, df) * sum(parts) ** 0.5
    close(c.t, t), close(c.p, p), close(c.df, df)
    ends = numpy.array([-half, 0, half]) + a.mean() - b.mean()
    close([c.effect_low, c.effect, c.effect_high], numpy.exp(ends) if scale else ends)


@pytest.mark.parametrize("t,df,unit", [(2.385, 4, 0.8), (-5.2, 11, 0.4), (0.3, 30, 0.1)])
def test_interval_of_effect_size(t, df, unit):
    # scipy.stats.nct solved for its noncentrality
    LIBRARY.uf_hedges_g.restype = EffectSize
    e = LIBRARY.uf_hedges_g(real(t), real(df), real(unit), real(0.9))
    for end, p in ((e.low, 0.95), (e.high, 0.05)):
        close(end, unit * optimize.brentq(lambda d: stats.nct.cdf(t, df, d) - p, t - 20, t + 20, xtol=1e-12), 1e-6)


def blocked(rows, blocks, groups, scale=DIFFERENCE):
    fit = Blocked()
    packed = (BlockedRow * len(rows))(*rows)
    run("uf_blocked_fit", packed, SIZE(len(rows)), blocks, groups, scale, ctypes.byref(fit))
    return fit


def irregular_blocks(seed, blocks, groups):
    """Some cells empty, some doubled; the control in every block."""
    rng = numpy.random.default_rng(seed)
    rows = []
    for b in range(blocks):
        for g in range(groups):
            for _ in range(1 if g == 0 else rng.integers(0, 3)):
                rows.append((2.5 * b + 0.7 * g + rng.normal() + 20, b, g))
    return rows


@pytest.mark.parametrize("seed,blocks,groups", [(1, 5, 2), (2, 6, 4), (3, 9, 7)])
def test_blocked_fit(seed, blocks, groups):
    # numpy.linalg.lstsq on dummies for every block and every group but the control
    rows = irregular_blocks(seed, blocks, groups)
    fit = blocked(rows, blocks, groups)
    x = numpy.array([[b == k for k in range(blocks)] + [g == k for k in range(1, groups)] for _, b, g in rows], float)
    y = numpy.array([v for v, _, _ in rows])
    beta, rss, rank, _ = numpy.linalg.lstsq(x, y, rcond=None)
    assert rank == x.shape[1]
    df = len(rows) - rank
    covariance = numpy.linalg.inv(x.T @ x)
    close(fit.df, df)
    close(fit.residual_sd, (rss[0] / df) ** 0.5)
    LIBRARY.uf_blocked_contrast.restype = Contrast
    for g in range(1, groups):
        for other in range(groups):
            if other == g:
                continue
            c = LIBRARY.uf_blocked_contrast(ctypes.byref(fit), g, other, real(0.95))
            v = numpy.zeros(rank)
            v[blocks + g - 1] = 1
            if other:
                v[blocks + other - 1] = -1
            se = (v @ covariance @ v * rss[0] / df) ** 0.5
            close(c.estimate, v @ beta)
            if sum(r[2] == g for r in rows) >= 3 and sum(r[2] == other for r in rows) >= 3:
                close(c.standard_error, se)
                close(c.p, 2 * stats.t.sf(abs(v @ beta / se), df))
    LIBRARY.uf_blocked_free(ctypes.byref(fit))


# ---- many ------------------------------------------------------------------------------------------

def multivariate_t(shape, df, limits):
    """Probability that all t stay below: scipy's multivariate normal, averaged over the estimated sd by Gauss and Legendre."""
    nodes, weights = numpy.polynomial.legendre.leggauss(40)
    s = (stats.chi2.ppf((nodes + 1) / 2, df) / df) ** 0.5
    inside = [stats.multivariate_normal.cdf(limits * k, cov=shape, maxpts=200000, abseps=1e-6)
              for k in s]
    return (numpy.array(inside) * weights).sum() / 2


@pytest.mark.parametrize("counts,df,limit", [((6, 4, 5), 12, 2.385), ((3, 3, 3, 3, 3), 10, 1.9), ((9, 3, 4, 7), 19, 3.1)])
def test_dunnett_against_multivariate_t(counts, df, limit):
    # scipy's quasi-random integration: four digits
    loading = numpy.array([(n / (n + counts[0])) ** 0.5 for n in counts[1:]])
    shape = numpy.outer(loading, loading)
    numpy.fill_diagonal(shape, 1)
    k = len(loading)
    expected = multivariate_t(shape, df, numpy.full(k, limit))
    close(number("uf_dunnett_below", real(limit), real(df), values(loading), SIZE(k), 1), expected, absolute=1e-4)


def test_dunnett_of_unbalanced_blocks():
    # the fit's own correlations, which are no products here
    rows = irregular_blocks(3, 9, 5)
    fit = blocked(rows, 9, 5)
    assert all(fit.counts[g] >= 3 for g in range(5))
    many, misfit = (Many * 5)(), DOUBLE()
    run("uf_dunnett_blocked", ctypes.byref(fit), 1, real(0.95), many, ctypes.byref(misfit))
    unscaled = numpy.array([[fit.unscaled[5 * g + h] for h in range(1, 5)] for g in range(1, 5)])
    sd = numpy.diag(unscaled) ** 0.5
    t = numpy.array([fit.effects[g] for g in range(1, 5)]) / sd / fit.residual_sd
    shape = unscaled / numpy.outer(sd, sd)
    assert 0 < misfit.value < 0.1
    for g in range(4):
        close(many[g + 1].t, t[g])
        close(many[g + 1].p_adjusted, 1 - multivariate_t(shape, fit.df, numpy.full(4, t[g])), absolute=1e-3)
    LIBRARY.uf_blocked_free(ctypes.byref(fit))


# ---- ranks -----------------------------------------------------------------------------------------

def rank_test(x, y, least=1):
    t = RankTest()
    run("uf_mann_whitney", arm(x), arm(y), DIFFERENCE, real(0.95), SIZE(least), ctypes.byref(t))
    return t


@pytest.mark.parametrize("n,m", [(4, 4), (7, 12), (15, 8), (40, 45)])
def test_mann_whitney(n, m):
    # scipy.stats.mannwhitneyu: exact without ties; Hodges and Lehmann's shift by numpy
    x, y = drawn(n + m, n, m)
    t = rank_test(x, y)
    for side, p in (("two-sided", t.p), ("greater", t.p_above), ("less", t.p_below)):
        u, expected = stats.mannwhitneyu(x, y, alternative=side, method="exact")
        close(p, expected)
    close(t.statistic, u)
    close(t.shift, numpy.median(numpy.subtract.outer(x, y)))


@pytest.mark.parametrize("n,m", [(4, 5), (6, 7)])
def test_mann_whitney_with_ties(n, m):
    # scipy.stats.permutation_test over all choices, of the rank sum's distance from its expectation
    rng = numpy.random.default_rng(n)
    x, y = rng.integers(0, 6, n) + 0.5, rng.integers(1, 8, m) + 0.5

    def away(a, b, axis=-1):
        ranks = stats.rankdata(numpy.concatenate([a, b], axis=-1), axis=-1)
        return numpy.abs(ranks[..., :a.shape[-1]].sum(axis=-1) - a.shape[-1] * (n + m + 1) / 2)

    expected = stats.permutation_test((x, y), away, vectorized=True, alternative="greater", n_resamples=numpy.inf)
    close(rank_test(x, y).p, expected.pvalue)


@pytest.mark.parametrize("n", [5, 9, 25])
def test_signed_rank(n):
    # scipy.stats.wilcoxon, exact; the shift from all means of two differences
    x, y = drawn(n, n, n)
    t = RankTest()
    run("uf_signed_rank", values(x), values(y), SIZE(n), DIFFERENCE, real(0.95), SIZE(4), ctypes.byref(t))
    close(t.p, stats.wilcoxon(x, y, mode="exact").pvalue)
    d = x - y
    close(t.shift, numpy.median([(d[i] + d[j]) / 2 for i in range(n) for j in range(i + 1)]))


# ---- variance --------------------------------------------------------------------------------------

def test_one_way():
    # scipy.stats.f_oneway
    groups = drawn(8, 5, 9, 2, 14)
    y, g = numpy.concatenate(groups), numpy.repeat(range(4), [5, 9, 2, 14]).astype(numpy.int32)
    fit = OneWay()
    run("uf_one_way_fit", values(y), g.ctypes.data_as(ctypes.POINTER(INT)), SIZE(len(y)), 4, real(0.95), ctypes.byref(fit))
    f, p = stats.f_oneway(*groups)
    close(fit.f, f), close(fit.p, p)


def nested(rows):
    c = Components()
    run("uf_components_fit", (NestedRow * len(rows))(*rows), SIZE(len(rows)), ctypes.byref(c))
    return c


def test_expected_mean_squares_of_unequal_sizes():
    # Simulated: unbiased whatever the sizes. 4000 experiments of two treatments, standard error of the mean known.
    rng = numpy.random.default_rng(17)
    plan = [(t, r, w) for t in range(2) for r in range(3 + t) for w in range(1 + (r + t) % 3) for _ in range(1 + (5 * r + 3 * w) % 4)]
    truth, found = numpy.array([2.25, 1.0, 4.0]), []
    for _ in range(4000):
        replicate, well = rng.normal(0, 1.5, (2, 4)), rng.normal(0, 1, (2, 4, 3))
        rows = [(10 * t + replicate[t, r] + well[t, r, w] + e, t, r, w) for (t, r, w), e in zip(plan, rng.normal(0, 2, len(plan)))]
        found.append(list(nested(rows).variance_signed))
    found = numpy.array(found)
    assert (abs(found.mean(0) - truth) < 4 * found.std(0) / 4000 ** 0.5).all()


def test_components_against_reml():
    # statsmodels' MixedLM by REML, which for balanced data and positive components is the analysis of variance
    api = pytest.importorskip("statsmodels.api")
    pandas = pytest.importorskip("pandas")
    rng = numpy.random.default_rng(23)
    replicate, well = rng.normal(0, 2, 8), rng.normal(0, 1.5, (8, 3))
    rows = [(30 + replicate[r] + well[r, w] + rng.normal(0, 1), 0, r, w) for r in range(8) for w in range(3) for _ in range(4)]
    c = nested(rows)
    frame = pandas.DataFrame(rows, columns=["y", "treatment", "replicate", "well"])
    fit = api.MixedLM.from_formula("y ~ 1", frame, groups="replicate", re_formula="1",
                                   vc_formula={"well": "0 + C(well)"}).fit(reml=True)
    assert min(c.variance) > 0
    close(c.variance[0], fit.cov_re.iloc[0, 0], 2e-3)
    close(c.variance[1], fit.vcomp[0], 2e-3)
    close(c.variance[2], fit.scale, 1e-4)


# ---- shares ----------------------------------------------------------------------------------------

@pytest.mark.parametrize("hits,trials", [(0, 7), (3, 11), (61, 64), (200, 1733), (5, 5)])
@pytest.mark.parametrize("name,method", [("uf_wilson", "wilson"), ("uf_clopper_pearson", "exact")])
def test_share(hits, trials, name, method):
    # scipy.stats.binomtest(...).proportion_ci
    function = getattr(LIBRARY, name)
    function.restype = Share
    s = function(real(hits), real(trials), real(0.95))
    expected = stats.binomtest(hits, trials).proportion_ci(0.95, method)
    close([s.low, s.high], [expected.low, expected.high], 1e-9, 1e-14)


# ---- doses -----------------------------------------------------------------------------------------

def hill(x, zero, full, log10_ec50, log_slope):
    with numpy.errstate(over="ignore", divide="ignore"):
        return zero + (full - zero) / (1 + (10 ** log10_ec50 / x) ** numpy.exp(log_slope))


@pytest.mark.parametrize("seed", range(12))
def test_dose_curve(seed):
    # scipy.optimize.curve_fit from the true curve: never a smaller sum, and the same standard errors
    rng = numpy.random.default_rng(seed)
    dose = numpy.repeat([0, 0.013, 0.05, 0.21, 0.9, 3.3, 14, 55], [6, 2, 3, 2, 3, 3, 2, 3])
    true = [rng.uniform(-5, 50), rng.uniform(80, 160), rng.uniform(-0.8, 0.5), rng.uniform(-0.3, 1)]
    if seed % 2:
        true[:2] = true[1::-1]
    y = hill(dose, *true) + rng.normal(0, 4, len(dose))
    fit = DoseFit()
    run("uf_dose_fit_one", (DosePoint * len(dose))(*zip(dose, y)), SIZE(len(dose)), real(0.05), real(0.95), ctypes.byref(fit))
    p, covariance = optimize.curve_fit(hill, dose, y, true, xtol=1e-13, ftol=1e-13, gtol=1e-13)
    rss = ((hill(dose, *p) - y) ** 2).sum()
    assert fit.rss <= rss * (1 + 1e-9)
    close([fit.zero, fit.full, fit.log10_ec50, numpy.log(fit.hill_slope)], p, 2e-4, 1e-5)
    close([fit.zero_se, fit.full_se, fit.log10_ec50_se, fit.hill_slope_se / fit.hill_slope], numpy.diag(covariance) ** 0.5, 2e-3)
    if fit.status == 0:
        limit = fit.rss * (1 + stats.f.ppf(0.95, 1, fit.df) / fit.df)
        for end in (fit.ec50_low, fit.ec50_high):
            held = numpy.log10(end)
            inner = optimize.least_squares(lambda q: hill(dose, q[0], q[1], held, q[2]) - y, [p[0], p[1], p[3]],
                                           xtol=1e-14, ftol=1e-14, gtol=1e-14, x_scale=[10, 10, 0.3])
            close(2 * inner.cost, limit, 1e-6)


# ---- planning --------------------------------------------------------------------------------------

@pytest.mark.parametrize("effect,variance,n,paired", [(0.7, 0.5, 4, 0), (1.9, 2.2, 9, 0), (0.4, 0.09, 3, 1), (3, 0.9, 3, 0)])
def test_power(effect, variance, n, paired):
    # scipy.stats.nct, both tails
    plan = Plan(DIFFERENCE, effect, 0.8, 0.95, paired, variance, float("nan"))
    df, delta = (1 if paired else 2) * (n - 1), effect / (2 * variance / n) ** 0.5
    limit = stats.t.ppf(0.975, df)
    with numpy.errstate(all="ignore"):
        expected = stats.nct.sf(limit, df, delta) + stats.nct.cdf(-limit, df, delta)
    close(number("uf_plan_power", ctypes.byref(plan), real(variance), n), expected, 1e-6)
