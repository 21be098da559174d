"""Writes FITS files of many kinds into a directory, by python3-fitsio: invented
data, the same every time. The first column of every table is a number."""
import gzip
import os
import shutil
import sys

import fitsio
import numpy as np

directory = sys.argv[1]
rng = np.random.default_rng(20260101)


def path(name):
    return os.path.join(directory, name)


def catalogue(rows):
    table = np.zeros(rows, dtype=[
        ("z", "f8"), ("z_err", "f4"), ("id", "i8"), ("u2", "u2"), ("u4", "u4"), ("i1", "i1"), ("i2", "i2"), ("i4", "i4"), ("u1", "u1"),
        ("flag", "?"), ("name", "S12"), ("mags", "f4", 5), ("cube", "f8", (2, 3)), ("tags", "S3", 2), ("wave", "c16")])
    for name in table.dtype.names:
        column = table[name]
        kind = column.dtype.kind
        if kind == "f":
            column[...] = rng.normal(size=column.shape)
        elif kind in "iu":
            info = np.iinfo(column.dtype)
            column[...] = rng.integers(info.min, info.max, size=column.shape, dtype=column.dtype, endpoint=True)
        elif kind == "b":
            column[...] = rng.integers(0, 2, size=column.shape).astype(bool)
        elif kind == "c":
            column[...] = rng.normal(size=column.shape) + 1j
        else:
            column[...] = rng.integers(0, 10, size=column.shape).astype("S3")
    if rows > 3:
        table["z"][3] = np.nan
    return table


units = ["", "", "", "", "", "m", "", "", "", "", "", "mag", "", "", ""]

with fitsio.FITS(path("plain.fits"), "rw", clobber=True) as f:
    f.write(catalogue(2000), extname="CAT", units=units)

with fitsio.FITS(path("sums.fits"), "rw", clobber=True) as f:
    f.write(rng.normal(size=(40, 50)))
    f.write(rng.integers(0, 100, size=(7, 9), dtype="i2"), extname="PIXELS")
    f.write(catalogue(777), extname="CAT", header={"SURVEY": "invented", "LONGONE": "it's " * 30})
    f.write(catalogue(10), extname="SECOND")
    f.write(rng.normal(size=30), extname="LAST")
    for hdu in f:
        hdu.write_checksum()

with fitsio.FITS(path("empty.fits"), "rw", clobber=True) as f:
    f.write(catalogue(1)[:0], extname="CAT")
    f[1].write_checksum()

with fitsio.FITS(path("one_row.fits"), "rw", clobber=True) as f:
    f.write(catalogue(1), extname="CAT")

# Arrays of varying length lie in the heap.
varying = np.zeros(300, dtype=[("z", "f4"), ("spectrum", "O"), ("note", "O")])
for row in range(300):
    varying["z"][row] = row / 100
    varying["spectrum"][row] = rng.normal(size=row % 17 + 1)
    varying["note"][row] = "n" * (row % 5 + 1)
with fitsio.FITS(path("heap.fits"), "rw", clobber=True) as f:
    f.write(varying, extname="SPECTRA")
    f[1].write_checksum()
    f.write(rng.normal(size=(3, 3)), extname="AFTER")

with open(path("sums.fits"), "rb") as source, gzip.open(path("packed.fits.gz"), "wb") as target:
    shutil.copyfileobj(source, target)
