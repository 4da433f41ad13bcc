# SPDX-License-Identifier: Apache-2.0
"""Samples as NumPy reads them: whole, and as a run that was killed leaves them."""
import os
import re

import numpy

from outputs import Run, check


def whole(run):
    rows = numpy.load(run.file("samples/SPD-01_x.0.npy"))
    check(rows.dtype == [("earliest", "<i8"), ("latest", "<i8"), ("speed", "<f8"),
                         ("fault_code", "<f8")], str(rows.dtype))
    check(rows.shape == (500,), str(rows.shape))
    check((rows["latest"] - rows["earliest"] == 900000).all(), "times")
    check(numpy.isnan(rows["speed"][77]) and numpy.isnan(rows["speed"]).sum() == 1, "NaN")
    # The record made by hand: a damped step from 0.1 s on.
    t = numpy.maximum(numpy.arange(500) * 0.002 - 0.1, 0)
    speed = 1500 * (1 - numpy.exp(-20 * t) * (numpy.cos(30 * t) + numpy.sin(30 * t) / 1.5))
    good = ~numpy.isnan(rows["speed"])
    check(numpy.allclose(rows["speed"][good], speed[good], rtol=0, atol=1e-9), "values")
    mapped = numpy.load(run.file("samples/SPD-01_x.0.npy"), mmap_mode="r")
    check((mapped["earliest"] == rows["earliest"]).all(), "mapped")
    csv = numpy.genfromtxt(run.file("samples/SPD-01_x.0.csv"), delimiter=",", names=True,
                           dtype=[("earliest", "i8"), ("latest", "i8"), ("speed", "f8"),
                                  ("fault_code", "f8")])
    for name in rows.dtype.names:
        check(numpy.array_equal(csv[name], rows[name], equal_nan=name == "speed"), "csv " + name)
    other = numpy.load(run.file("samples/SPD-01_x.1.npy"))
    check(other.dtype.names == ("earliest", "latest", "shaft_torque"), str(other.dtype))


def killed(run):
    """
    While a run goes on, rows come first and the header's count after them. So
    a killed run leaves a count of k, at least k whole rows, and perhaps more
    or half a row: NumPy must read k rows from each such file.
    """
    data = run.read("samples/SPD-01_x.0.npy")
    rows = numpy.load(run.file("samples/SPD-01_x.0.npy"))
    header = len(data) - 500 * 32
    shape = re.search(rb"'shape': \((\d+ *),\)", data[:header])
    path = os.path.join(run.top, "killed.npy")
    for count in (0, 1, 7, 499):
        begun = bytearray(data)
        begun[shape.start(1):shape.end(1)] = str(count).encode().ljust(len(shape.group(1)))
        least = header + count * 32
        for cut in range(least, min(least + 70, len(data)) + 1):
            with open(path, "wb") as file:
                file.write(begun[:cut])
            part = numpy.load(path)
            check(part.shape == (count,), "%d rows of %d" % (len(part), count))
            check(part.tobytes() == rows[:count].tobytes(), "rows of a killed run")


with Run(" x") as one:
    whole(one)
    killed(one)
print("ok")
