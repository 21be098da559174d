"""Writes sums.fits: an invented table whose sums CFITSIO has computed."""
import fitsio
import numpy as np

rows = 300
table = np.zeros(rows, dtype=[("id", "i4"), ("z", "f8"), ("name", "S5"), ("flag", "?")])
table["id"] = np.arange(rows)
table["z"] = np.linspace(0.01, 3, rows)
table["name"] = [f"q{i}".encode() for i in range(rows)]
table["flag"] = table["id"] % 3 == 0
with fitsio.FITS("sums.fits", "rw", clobber=True) as f:
    f.write(table, extname="SUMS")
    f[1].write_checksum()
