"""Camera and flat calibration against numpy and scipy: the same definitions written out in a few array operations."""
import ctypes

import numpy
import pytest
from scipy import ndimage, stats

from probe import LIBRARY, Error, Plane, Work, strided, view

D, I, P, U64 = ctypes.c_double, ctypes.c_int, ctypes.c_void_p, ctypes.c_uint64


class Step(ctypes.Structure):
    _fields_ = [("started", I), ("broken", I), ("first", ctypes.c_int64), ("divisor", ctypes.c_int64)]


class DarkFrames(ctypes.Structure):
    _fields_ = [("width", I), ("height", I), ("count", I)] + \
        [(name, ctypes.POINTER(D)) for name in ("mean", "squares", "shift", "scatter")] + \
        [("fingerprint", P), ("level", D), ("at_zero", D), ("step", Step)]


class Dark(ctypes.Structure):
    _fields_ = [("frames", ctypes.POINTER(DarkFrames))] + [(name, D) for name in (
        "step", "offset", "offset_sd", "drift", "pattern", "variance", "variance_sd", "noise", "noise_sd", "noise_rms")] + \
        [("is_bound", I)] + [(name, D) for name in ("noisy_share", "hot_share", "clipped_share")] + \
        [("defects", Plane), ("ordinary_pixels", D)]


class Point(ctypes.Structure):
    _fields_ = [(name, D) for name in (
        "exposure", "mean", "signal", "variance", "variance_sd", "pixels", "rejected", "saturated", "saturation", "highest",
        "flicker", "low", "high", "correlation_x", "correlation_y")]


class Stack(ctypes.Structure):
    _fields_ = [("width", I), ("height", I), ("count", I), ("step", Step), ("first", P), ("current", P), ("images", P)]


class Request(ctypes.Structure):
    _fields_ = [("sample", I), ("dark", Plane), ("offset", D), ("defects", Plane), ("full_scale", D), ("smooth_px", D)]


class Flat(ctypes.Structure):
    _fields_ = [("image", Plane), ("noise", Plane), ("count", Plane)] + \
        [(name, D) for name in ("noise_pixel", "noise_halves", "noise_expected", "smooth_bias")] + \
        [("too_noisy", I), ("images_wanted", I)] + \
        [(name, D) for name in ("smooth_wanted", "rejected", "never_kept", "unevenness", "lowest", "highest")] + \
        [("lowest_x", I), ("lowest_y", I), ("images", I), ("level", ctypes.POINTER(D)), ("unlikeness", ctypes.POINTER(D))]


def check(status, error):
    assert status == 0, error.text.decode()


def frame(rng, shape, light, gain=0.47, offset=103.4):
    plane = strided(shape, numpy.float32)
    plane[:] = numpy.floor(offset + rng.poisson(light, shape) / gain + 2.9 * rng.standard_normal(shape) + 0.5)
    return plane


def array_of(pointer, shape):
    return numpy.ctypeslib.as_array(pointer, shape)


def pixels_of(plane):
    values = (ctypes.c_float * (plane.stride * plane.height)).from_address(plane.data)
    return numpy.array(values).reshape(plane.height, plane.stride)[:, :plane.width]


@pytest.mark.parametrize("shape", [(31, 37), (64, 97)])
def test_dark_frames_and_a_pair(shape):
    rng = numpy.random.default_rng(shape[0])
    work, error, frames, dark, point = Work(), Error(), DarkFrames(), Dark(), Point()
    darks = [frame(rng, shape, 0) + drift for drift in (0, 1, -2, 0, 3)]
    check(LIBRARY.uf_dark_start(ctypes.byref(work), shape[1], shape[0], ctypes.byref(frames), ctypes.byref(error)), error)
    for plane in darks:
        check(LIBRARY.uf_dark_add(ctypes.byref(work), ctypes.byref(frames), view(Plane, plane), ctypes.byref(error)), error)
    check(LIBRARY.uf_dark_finish(ctypes.byref(work), ctypes.byref(frames), ctypes.byref(dark), ctypes.byref(error)), error)
    # each frame's own shift taken out, numpy's mean and variance of each pixel
    shift = array_of(frames.shift, (5,))
    assert numpy.abs(shift - (0, 1, -2, 0, 3)).max() < 0.5
    stack = numpy.array(darks, float) - shift[:, None, None]
    assert numpy.abs(array_of(frames.mean, shape) - stack.mean(0)).max() < 1e-9
    assert numpy.abs(array_of(frames.squares, shape) / 4 - stack.var(0, ddof=1)).max() < 1e-8
    assert abs(frames.level - shift.mean()) < 1e-12
    assert dark.ordinary_pixels == shape[0] * shape[1]
    assert abs(dark.variance - stack.var(0, ddof=1).mean()) < 1e-5
    assert abs(dark.noise_rms - numpy.sqrt(dark.variance - 1 / 12)) < 1e-9

    # a pair scaled to one mean, tile by tile (here 1 x 1 and 3 x 2 of them), half the variance of the difference
    a, b = frame(rng, shape, 900), frame(rng, shape, 930)
    check(LIBRARY.uf_photon_pair(ctypes.byref(work), ctypes.byref(dark), view(Plane, a), view(Plane, b), D(20.5), D(numpy.nan),
                                 None, ctypes.byref(point), ctypes.byref(error)), error)
    mean = array_of(frames.mean, shape) + frames.level
    a, b = a - mean, b - mean
    scale_a, scale_b = (a.mean() + b.mean()) / 2 / a.mean(), (a.mean() + b.mean()) / 2 / b.mean()
    difference = scale_a * a - scale_b * b
    across, down = max(1, (shape[1] + 16) // 32), max(1, (shape[0] + 16) // 32)
    squares, degrees = 0, 0
    for j in range(down):
        for i in range(across):
            tile = difference[j * shape[0] // down:(j + 1) * shape[0] // down, i * shape[1] // across:(i + 1) * shape[1] // across]
            squares += ((tile - tile.mean()) ** 2).sum()
            degrees += tile.size - 1
    assert point.rejected == 0
    variance = squares / degrees / 2
    variance = (variance - dark.variance * (scale_a ** 2 + scale_b ** 2) / 2) / (scale_a * scale_b) + dark.variance
    assert abs(point.variance / variance - 1) < 1e-9
    assert abs(point.signal - (a.mean() + b.mean()) / 2) < 1e-8
    assert abs(point.flicker - (a.mean() / b.mean() - 1)) < 1e-9
    LIBRARY.uf_arena_free(ctypes.byref(work))


def smooth_over_gaps(values, sigma):
    """A quadric taken out, normalised convolution, the quadric back."""
    y, x = numpy.mgrid[-1:1:values.shape[0] * 1j, -1:1:values.shape[1] * 1j]
    terms = numpy.stack([x ** 0, x, y, x * x, x * y, y * y], -1)
    known = ~numpy.isnan(values)
    trend = terms @ numpy.linalg.lstsq(terms[known], values[known], rcond=None)[0]
    rest = ndimage.gaussian_filter(numpy.where(known, values - trend, 0), sigma)
    return trend + rest / ndimage.gaussian_filter(known.astype(float), sigma)


@pytest.mark.parametrize("sigma", [0, 1.7, 4.2])
@pytest.mark.parametrize("count", [3, 9])
def test_flat(sigma, count):
    rng = numpy.random.default_rng(count)
    shape = (53, 71)
    y, x = numpy.mgrid[:shape[0], :shape[1]]
    light = 900 * numpy.exp(-((x - 30) ** 2 + (y - 29) ** 2) / (2 * 47.0 ** 2))
    images = [frame(rng, shape, light * (1 + 0.1 * rng.random())) for _ in range(count)]
    images[1][11:19, 23:31] *= 0.3  # dust
    defects = strided(shape, numpy.float32)
    defects[7::19, 5::13] = 1
    work, error, stack, flat = Work(), Error(), Stack(), Flat()
    for image in images:
        check(LIBRARY.uf_flat_add(ctypes.byref(stack), view(Plane, image), ctypes.byref(error)), error)
    request = Request(sample=0, offset=103.4, defects=view(Plane, defects), full_scale=numpy.nan, smooth_px=sigma)
    check(LIBRARY.uf_flat_make(ctypes.byref(work), ctypes.byref(stack), ctypes.byref(request), ctypes.byref(flat),
                               ctypes.byref(error)), error)
    level = array_of(flat.level, (count,))
    values = (numpy.array(images, float) - 103.4) / level[:, None, None]
    counts = pixels_of(flat.count)
    if count == 3:
        expected = numpy.median(values, 0)
        noise = values.std(0, ddof=1) / numpy.sqrt(3) * numpy.sqrt(0.4487 * 3)
    else:
        # those that were kept are the nearest to the median: as many as the count says
        away = numpy.abs(values - numpy.median(values, 0))
        kept = stats.rankdata(away, axis=0, method="ordinal") <= counts
        expected = numpy.where(kept, values, 0).sum(0) / numpy.maximum(1, counts)
        noise = numpy.sqrt((numpy.where(kept, values - expected, 0) ** 2).sum(0) / numpy.maximum(1, counts - 1) / numpy.maximum(1, counts))
        assert (counts[defects == 0] >= 5).all() and (counts[12:18, 24:30] <= 8).all()
    expected[defects != 0] = numpy.nan
    assert numpy.nanmax(numpy.abs(pixels_of(flat.noise) / (noise / expected) - 1)) < 2e-3
    smooth = smooth_over_gaps(expected, sigma or 1.5)
    expected = smooth if sigma else numpy.where(numpy.isnan(expected), smooth, expected)
    expected /= expected.mean()
    assert numpy.abs(pixels_of(flat.image) - expected).max() < 1e-4
    assert abs(flat.unevenness / (numpy.quantile(expected, 0.99) / numpy.quantile(expected, 0.01)) - 1) < 1e-4
    assert abs(flat.lowest - expected.min()) < 1e-4
    assert abs(flat.never_kept - (defects != 0).mean()) < 1e-12
    LIBRARY.uf_flat_stack_free(ctypes.byref(stack))
    LIBRARY.uf_arena_free(ctypes.byref(work))
