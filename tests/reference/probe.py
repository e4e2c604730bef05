"""The probe library through ctypes: planes and labels as numpy arrays."""
import ctypes
import os

import numpy

ROOT = os.path.dirname(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
LIBRARY = ctypes.CDLL(os.environ.get("UF_PROBE", os.path.join(ROOT, "build/probe/libunderfoot.so")))


class Plane(ctypes.Structure):
    _fields_ = [("data", ctypes.c_void_p), ("width", ctypes.c_int), ("height", ctypes.c_int), ("stride", ctypes.c_ssize_t)]


class Labels(ctypes.Structure):
    _fields_ = Plane._fields_ + [("count", ctypes.c_int)]


class Box(ctypes.Structure):
    _fields_ = [(name, ctypes.c_int) for name in ("x0", "y0", "x1", "y1")]


class Work(ctypes.Structure):
    _fields_ = [("first", ctypes.c_void_p), ("current", ctypes.c_void_p), ("pool", ctypes.c_void_p)]


class Error(ctypes.Structure):
    _fields_ = [("status", ctypes.c_int), ("text", ctypes.c_char * 1024)]


class Shape(ctypes.Structure):
    _fields_ = [(name, ctypes.c_double) for name in (
        "area", "x", "y", "perimeter", "caliper_max", "caliper_min", "hull_area", "axis_long", "axis_short", "orientation")]


def view(kind, array):
    """A view of a two-dimensional array whose rows may be strided."""
    item = array.itemsize
    assert array.strides[1] == item
    plane = kind(array.ctypes.data, array.shape[1], array.shape[0], array.strides[0] // item)
    if kind is Labels:
        plane.count = int(array.max())
    return plane


def call(name, *arguments):
    """Calls a function of the library that takes work first and an error last, and returns a status."""
    work, error = Work(), Error()
    function = getattr(LIBRARY, name)
    function.restype = ctypes.c_int
    status = function(ctypes.byref(work), *arguments, ctypes.byref(error))
    LIBRARY.uf_arena_free(ctypes.byref(work))
    assert status == 0, error.text.decode()


def real(value):
    return ctypes.c_double(value)


def strided(shape, dtype):
    """An array inside a larger one, so that stride and width differ."""
    return numpy.zeros((shape[0], shape[1] + 5), dtype)[:, 2:2 + shape[1]]
