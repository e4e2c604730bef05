"""Image operations against scipy.ndimage and scikit-image, on irregular data and sizes."""
import ctypes

import numpy
import pytest
from scipy import ndimage
from skimage import measure

from probe import Box, LIBRARY, Labels, Plane, Shape, call, real, strided, view

SIZES = [(1, 1), (1, 37), (41, 1), (2, 3), (17, 19), (64, 64), (97, 131), (130, 67)]


def random_plane(shape, seed):
    plane = strided(shape, numpy.float32)
    plane[:] = 1000 * numpy.random.default_rng(seed).random(shape) - 200
    return plane


def blobs(shape, seed, share=0.5):
    noise = ndimage.gaussian_filter(numpy.random.default_rng(seed).standard_normal(shape), 1.3)
    return noise > numpy.quantile(noise, 1 - share)


@pytest.mark.parametrize("shape", SIZES)
@pytest.mark.parametrize("sigma", [0.3, 0.73, 1.0, 2.385, 9.1])
def test_gaussian(shape, sigma):
    # scipy.ndimage.gaussian_filter with its defaults (mode reflect, truncate 4), in double
    plane, out = random_plane(shape, 1), strided(shape, numpy.float32)
    call("uf_smooth", view(Plane, plane), real(sigma), view(Plane, out))
    expected = ndimage.gaussian_filter(plane.astype(float), sigma)
    assert numpy.abs(out - expected).max() < 2e-3
    call("uf_smooth", view(Plane, plane), real(sigma), view(Plane, plane))
    assert (plane == out).all()


@pytest.mark.parametrize("shape", SIZES)
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_distance_transform(shape, seed):
    # scipy.ndimage.distance_transform_edt of each label on its own, the image border being no outline
    labels = strided(shape, numpy.int32)
    labels[:] = numpy.random.default_rng(seed).integers(0, 4, shape) if seed == 1 else \
        ndimage.label(blobs(shape, seed))[0] * blobs(shape, seed + 9, 0.8)
    out = strided(shape, numpy.float32)
    call("uf_distance", view(Labels, labels), None, view(Plane, out))
    for k in numpy.unique(labels):
        inside = labels == k
        if inside.all():
            assert (out == 1e6).all()
            continue
        expected = ndimage.distance_transform_edt(inside)
        assert numpy.abs(out[inside] - expected[inside]).max() < 1e-4


@pytest.mark.parametrize("shape", SIZES)
@pytest.mark.parametrize("eight", [0, 1])
@pytest.mark.parametrize("share", [0.05, 0.5, 0.8])
def test_components(shape, eight, share):
    # scipy.ndimage.label: the same numbers in the same order
    mask = strided(shape, numpy.uint8)
    mask[:] = blobs(shape, 5, share) ^ (numpy.random.default_rng(6).random(shape) < 0.03)
    out = strided(shape, numpy.int32)
    labels = view(Labels, out)
    call("uf_components", view(Plane, mask), eight, ctypes.byref(labels))
    expected, count = ndimage.label(mask, numpy.ones((3, 3)) if eight else None)
    assert labels.count == count
    assert (out == expected).all()


@pytest.mark.parametrize("shape", [(17, 19), (97, 131)])
def test_fill_holes(shape):
    # scipy.ndimage.binary_fill_holes (4-connected background), no limit on size
    mask = strided(shape, numpy.uint8)
    mask[:] = blobs(shape, 7, 0.6)
    expected = ndimage.binary_fill_holes(mask)
    assert expected.sum() > mask.sum()
    call("uf_fill_holes", view(Plane, mask), real(0), real(1e9), Plane())
    assert (mask == expected).all()


@pytest.mark.parametrize("shift", [(0.0, 0.0), (3.0, -5.0), (0.37, 0.5), (-2.61, 1.73), (0.999, -0.001)])
def test_shift(shift):
    # an analytic band-limited image: sums of cosines of at least 8 px, moved exactly
    dx, dy = shift
    random = numpy.random.default_rng(8)
    waves = [(random.uniform(-0.8, 0.8), random.uniform(-0.8, 0.8), random.uniform(0, 6.3)) for _ in range(12)]
    y, x = numpy.mgrid[0:90, 0:110].astype(float)
    image = lambda ax, ay: sum(numpy.cos(u * ax + v * ay + p) for u, v, p in waves)
    plane, out = strided((90, 110), numpy.float32), strided((90, 110), numpy.float32)
    plane[:] = image(x, y)
    call("uf_shift", view(Plane, plane), real(dx), real(dy), view(Plane, out))
    expected = image(x + dx, y + dy)
    inner = (slice(10, -10), slice(10, -10))
    assert numpy.abs(out[inner] - expected[inner]).max() < (1e-6 if dx == int(dx) and dy == int(dy) else 0.02)


@pytest.mark.parametrize("shape", [(64, 64), (97, 131)])
@pytest.mark.parametrize("factor", [1, 2, 3, 5, 16])
def test_reduce(shape, factor):
    # block means by numpy, ragged ends over what there is
    plane = random_plane(shape, 11)
    height, width = -(-shape[0] // factor), -(-shape[1] // factor)
    out = strided((height, width), numpy.float32)
    LIBRARY.uf_reduce(ctypes.byref((ctypes.c_void_p * 3)()), view(Plane, plane), factor, view(Plane, out))
    for v in range(height):
        for u in range(width):
            block = plane[v * factor:(v + 1) * factor, u * factor:(u + 1) * factor]
            assert out[v, u] == pytest.approx(block.astype(float).mean(), abs=1e-3)


@pytest.mark.parametrize("seed", [21, 22, 23, 24])
def test_shapes(seed):
    # skimage.measure.regionprops: area, centroid, ellipse axes, orientation, Crofton perimeter of four directions
    labels = ndimage.label(numpy.pad(blobs((90, 120), seed, 0.4), 3))[0].astype(numpy.int32)
    boxes = (Box * (labels.max() + 1))()
    LIBRARY.uf_label_boxes(view(Labels, labels), boxes)
    checked = 0
    for region in measure.regionprops(labels):
        shape = Shape()
        call("uf_shape_of", view(Labels, labels), region.label, boxes[region.label], ctypes.byref(shape))
        assert shape.area == region.area
        assert (shape.y, shape.x) == pytest.approx(region.centroid, abs=1e-9)
        # skimage leaves out the twelfth of a pixel's own extent
        inertia = region.inertia_tensor_eigvals
        assert shape.axis_long == pytest.approx(4 * numpy.sqrt(inertia[0] + 1 / 12), rel=1e-6)
        assert shape.axis_short == pytest.approx(4 * numpy.sqrt(max(inertia[1], 0) + 1 / 12), rel=1e-6)
        if region.area > 30:
            assert shape.perimeter == pytest.approx(region.perimeter_crofton, rel=0.03)
            assert shape.area <= shape.hull_area + 1e-9
            assert shape.hull_area == pytest.approx(region.convex_area, rel=0.1, abs=8)
            if inertia[0] > 1.3 * inertia[1]:
                # theirs runs from the row axis, ours from the x axis counter-clockwise as seen
                ours = (shape.orientation - (numpy.degrees(region.orientation) - 90)) % 180
                assert min(ours, 180 - ours) < 1e-5
            checked += 1
    assert checked >= 3


@pytest.mark.parametrize("count", [1, 2, 3, 10, 101, 4000])
def test_quantiles(count):
    # numpy.quantile (linear, definition 7), and infinities for what is missing
    random = numpy.random.default_rng(count)
    for missing in (0, 1, count // 2, 3 * count):
        values = numpy.round(random.standard_normal(count) * 5, 1).astype(numpy.float32)
        q = numpy.array([0.05, 0.25, 0.5, 0.75, 0.95])
        out = numpy.zeros(5)
        copy = values.copy()
        LIBRARY.uf_quantiles(copy.ctypes.data_as(ctypes.c_void_p), ctypes.c_size_t(count), ctypes.c_size_t(count + missing),
                             q.ctypes.data_as(ctypes.c_void_p), out.ctypes.data_as(ctypes.c_void_p), 5)
        ordered = numpy.concatenate([numpy.sort(values.astype(float)), numpy.full(missing, numpy.inf)])
        at = q * (count + missing - 1)
        for k in range(5):
            low, part = int(at[k]), at[k] - int(at[k])
            high = low + 1 if part > 0 else low
            if numpy.isinf(ordered[high]):
                assert numpy.isnan(out[k])
            else:
                assert out[k] == pytest.approx(ordered[low] + part * (ordered[high] - ordered[low]), abs=1e-6)
        if not missing:
            assert out == pytest.approx(numpy.quantile(values.astype(float), q), abs=1e-6)
