"""Load a correction table and a corrected map: python3 load_table.py TABLE.ecsv CORRECTED.fits"""
import sys

import numpy as np
import sunpy.map
from astropy.table import QTable

table = QTable.read(sys.argv[1])
print(table.meta["truth"], table.meta["caution"])
for quantity in sorted(set(table["quantity"])):
    rows = table[table["quantity"] == quantity]
    print(quantity, len(rows), f"nodes, median factor {np.nanmedian(np.exp(rows['ln_median'])):.3f}")

maps = {m.meta["extname"]: m for m in sunpy.map.Map(sys.argv[2])}
print({name: m.unit for name, m in maps.items()})
inside = np.isfinite(maps["FACTOR"].data)
print(f"{inside.sum()} pixels corrected, by {np.median(maps['FACTOR'].data[inside]):.3f}")
assert (maps["B_LOW68"].data[inside] <= maps["B_HIGH68"].data[inside]).all()
