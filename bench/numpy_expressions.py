"""The library beside numpy expressions, in one process on the same arrays.

    numpy_expressions.py ELEMENTS REPETITIONS THREADS SERIES ARRAYS PROGRAM

ARRAYS is a shared library of arrays.c and library.c: it fills numpy's arrays with the numbers that the other benchmarks
use, and measures them. Each repetition times both; the ratio is formed in each. Prints "name value" lines.
"""

import ctypes
import statistics
import sys
import time

import numpy as np

SHELLS = 8


class Gas(ctypes.Structure):
    _fields_ = [("precision", ctypes.c_int), ("count", ctypes.c_size_t)] + [
        (name, ctypes.c_void_p)
        for name in ["position", "velocity", "mass", "star_formation_rate", "internal_energy", "metallicity"]
    ]


class Request(ctypes.Structure):
    _fields_ = [(name, ctypes.c_int) for name in ["gauges", "shells", "stations"]] + [
        (name, ctypes.c_double) for name in ["inner", "outer"]
    ]


class Geometry(ctypes.Structure):
    _fields_ = [
        ("box", ctypes.c_double),
        ("station", ctypes.c_double * 3),
        ("edges", ctypes.c_double * (SHELLS + 1)),
        ("hubble", ctypes.c_double),
    ]


class Quantities(ctypes.Structure):
    _fields_ = [
        ("star_formation_rate", ctypes.c_double),
        ("mass", ctypes.c_double),
        ("outward", ctypes.c_double * SHELLS),
        ("inward", ctypes.c_double * SHELLS),
        ("shell_mass", ctypes.c_double * SHELLS),
        ("elements", ctypes.c_uint64 * SHELLS),
    ]


def measure(arrays, where):
    """What the library measures, as one writes it with numpy; in double precision."""
    box, hubble = where.box, where.hubble
    station, edges = np.array(where.station), np.array(where.edges)
    d = arrays["position"] - station
    d -= box * np.rint(d / box)
    r = np.sqrt((d**2).sum(axis=1))
    speed = (d * arrays["velocity"]).sum(axis=1) / r + hubble * r
    flux = arrays["mass"] * speed
    shell = np.digitize(r, edges) - 1
    within = (shell >= 0) & (shell < SHELLS)
    out = within & (speed >= 0)
    inward = within & (speed < 0)
    found = Quantities()
    found.star_formation_rate = arrays["star_formation_rate"].sum(dtype=np.float64)
    found.mass = arrays["mass"].sum(dtype=np.float64)
    found.outward[:] = np.bincount(shell[out], weights=flux[out], minlength=SHELLS)
    found.inward[:] = np.bincount(shell[inward], weights=flux[inward], minlength=SHELLS)
    found.shell_mass[:] = np.bincount(shell[within], weights=arrays["mass"][within], minlength=SHELLS)
    found.elements[:] = [int(count) for count in np.bincount(shell[within], minlength=SHELLS)]
    return found


def tell(name, values):
    print(f"{name} {statistics.median(values):.6g}\n{name}_min {min(values):.6g}\n{name}_max {max(values):.6g}")


def main():
    count, repetitions, threads = (int(word) for word in sys.argv[1:4])
    series, arrays_library, program = (word.encode() for word in sys.argv[4:7])
    bench = ctypes.CDLL(arrays_library.decode())
    bench.usual_request.restype = Request
    bench.usual_geometry.restype = Geometry
    bench.library_open.restype = ctypes.c_void_p
    bench.library_open.argtypes = [ctypes.c_char_p, ctypes.POINTER(Request), ctypes.c_int]
    bench.library_step.argtypes = [ctypes.c_void_p, ctypes.POINTER(Gas), ctypes.c_uint64]
    bench.library_close.argtypes = [ctypes.c_void_p]
    bench.library_read_back.restype = Quantities
    bench.library_read_back.argtypes = [ctypes.c_char_p, ctypes.c_char_p]
    bench.quantities_must_agree.argtypes = [
        ctypes.c_char_p,
        ctypes.POINTER(Quantities),
        ctypes.POINTER(Quantities),
        ctypes.c_double,
    ]

    arrays = {name: np.empty((count, 3), np.float32) for name in ["position", "velocity"]}
    for name in ["mass", "star_formation_rate", "internal_energy", "metallicity"]:
        arrays[name] = np.empty(count, np.float32)
    gas = Gas(precision=4, count=count, **{name: array.ctypes.data for name, array in arrays.items()})
    bench.gas_fill(ctypes.byref(gas), ctypes.c_uint64(0))
    request, where = bench.usual_request(), bench.usual_geometry()

    run = bench.library_open(series, ctypes.byref(request), threads)
    seconds, numpy_seconds, ratios = [], [], []
    found = None
    for repetition in range(-1, repetitions):
        start = time.perf_counter()
        bench.library_step(run, ctypes.byref(gas), repetition + 2)
        middle = time.perf_counter()
        if repetition < 0:
            continue
        found = measure(arrays, where)
        end = time.perf_counter()
        seconds.append(middle - start)
        numpy_seconds.append(end - middle)
        ratios.append((end - middle) / (middle - start))
    bench.library_close(run)
    library = bench.library_read_back(program, series)
    bench.quantities_must_agree(b"numpy", ctypes.byref(found), ctypes.byref(library), 1e-9)
    tell("numpy_seconds", numpy_seconds)
    tell("sweep_beside_numpy_seconds", seconds)
    tell("numpy_over_sweep", ratios)


main()
