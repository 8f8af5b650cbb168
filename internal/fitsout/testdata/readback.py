# Prints as JSON what astropy finds in a FITS file: cards, data and checksum state of every HDU.
import json, sys, warnings
import numpy as np
from astropy.io import fits

def plain(v):
    if isinstance(v, (bytes, np.bytes_)): return v.decode()
    if isinstance(v, np.ndarray): return [plain(x) for x in v.tolist()]
    if isinstance(v, (list, tuple)): return [plain(x) for x in v]
    if isinstance(v, (np.bool_, bool)): return bool(v)
    if isinstance(v, (float, np.floating)): return repr(float(v))
    if isinstance(v, np.integer): return int(v)
    if isinstance(v, np.str_): return str(v)
    return v

out = []
with warnings.catch_warnings(record=True) as caught:
    warnings.simplefilter("always")
    with fits.open(sys.argv[1], checksum=True) as hdus:
        hdus.verify("exception")
        for h in hdus:
            d = {"name": h.name, "kind": type(h).__name__, "cards": {}, "comments": {}}
            for c in h.header.cards:
                if c.keyword in ("COMMENT", "HISTORY", ""): continue
                d["cards"][c.keyword] = plain(c.value)
                d["comments"][c.keyword] = c.comment
            d["comment"] = [str(x) for x in h.header.get("COMMENT", [])]
            d["checksum"] = int(h.verify_checksum()); d["datasum"] = int(h.verify_datasum())
            if h.data is not None and h.data.dtype.names:
                d["rows"] = [[plain(r[n]) for n in h.data.dtype.names] for r in h.data]
            elif h.data is not None:
                d["shape"] = list(h.data.shape); d["dtype"] = h.data.dtype.name
                d["pixels"] = [plain(x) for x in h.data.ravel()]
            out.append(d)
print(json.dumps({"hdus": out, "warnings": [str(w.message) for w in caught]}))
