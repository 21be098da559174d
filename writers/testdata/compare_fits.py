"""Compares an enriched file with its input, both read by python3-fitsio: every
old unit and column is equal, and the three new columns are what the suite in
writertest fills in."""
import sys

import fitsio
import numpy as np

before, after = fitsio.FITS(sys.argv[1]), fitsio.FITS(sys.argv[2])


def same(a, b):
    if a.dtype == object:
        return all(same(np.asarray(x), np.asarray(y)) for x, y in zip(a, b))
    return a.dtype == b.dtype and a.shape == b.shape and a.tobytes() == b.tobytes()


def records(hdu):
    return {r["name"]: r["value"] for r in hdu.read_header().records() if r.get("name") not in (None, "COMMENT", "HISTORY", "CONTINUE")}


assert len(before) == len(after), (len(before), len(after))
seen = False
for number, (old, new) in enumerate(zip(before, after)):
    if not isinstance(old, fitsio.hdu.TableHDU) or seen:
        assert records(old) == records(new), number
        if old.has_data():
            assert same(old.read(), new.read()), number
        continue
    seen = True
    rows = old.get_nrows()
    assert new.get_nrows() == rows
    names = old.get_colnames()
    assert new.get_colnames() == names + ["added_length", "added_flag", "added_status"], new.get_colnames()
    changed = {"NAXIS1", "TFIELDS", "CHECKSUM", "DATASUM", "THEAP"}
    header = records(new)
    for key, value in records(old).items():
        assert key in changed or header[key] == value, (key, value, header.get(key))
    assert header["TUNIT%d" % (len(names) + 1)] == "Mpc"
    assert header["TCOMM%d" % (len(names) + 1)] == "a length of the suite"
    if rows == 0:
        continue
    for name in names:
        assert same(old[name].read(), new[name].read()), name
    row = np.arange(rows)
    length = new["added_length"].read()
    want = np.where(row % 7 == 0, np.nan, np.sqrt(row.astype("f8")) * 1000)
    assert length.dtype == np.dtype(">f8") or length.dtype == np.dtype("f8"), length.dtype
    assert np.array_equal(length, want, equal_nan=True)
    flag = new["added_flag"].read()
    assert flag.dtype == bool
    assert np.array_equal(flag[row % 7 != 0], (row % 2 == 1)[row % 7 != 0])
    assert np.array_equal(new["added_status"].read(), row % 1000)
assert seen
