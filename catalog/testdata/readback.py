# Prints as JSON what astropy makes of a catalog: columns with units, UCDs and values, checksum states, and the UCDs
# and units that it refuses.
import json, sys, warnings
import numpy as np
from astropy import units
from astropy.io import fits
from astropy.io.votable import ucd
from astropy.table import Table

def plain(v):
    if isinstance(v, (bytes, np.bytes_)): return v.decode()
    if isinstance(v, (float, np.floating)): return float(v).hex()
    if isinstance(v, np.integer): return int(v)
    return str(v)

tables, refused = {}, []
with warnings.catch_warnings(record=True) as caught:
    warnings.simplefilter("always")
    with fits.open(sys.argv[1], checksum=True) as hdus:
        hdus.verify("exception")
        states = [[int(h.verify_checksum()), int(h.verify_datasum())] for h in hdus]
        primary = {k: plain(v) for k, v in hdus[0].header.items()}
        for h in hdus[1:]:
            columns = []
            for i, c in enumerate(h.columns, 1):
                word = h.header["TUCD%d" % i]
                if not ucd.check_ucd(word, check_controlled_vocabulary=True): refused.append(word)
                if c.unit:
                    try: units.Unit(c.unit, format="fits")
                    except ValueError: refused.append(c.unit)
                columns.append({"name": c.name, "unit": c.unit or "", "ucd": word, "display": c.disp or "",
                                "description": h.header["TCOMM%d" % i]})
            tables[h.name] = {"columns": columns, "rows": [[plain(r[c.name]) for c in h.columns] for r in h.data],
                              "flags": [h.header.get("FLAG%d" % b, "") for b in range(32)]}
    for name in ("OBJECTS", "LINES", "ABSORBERS"):
        t = Table.read(sys.argv[1], hdu=name)
        tables[name]["table_rows"] = len(t)
        tables[name]["table_units"] = {c: str(t[c].unit) for c in t.colnames if t[c].unit is not None}
print(json.dumps({"tables": tables, "states": states, "primary": primary, "refused": refused,
                  "warnings": [str(w.message) for w in caught]}))
