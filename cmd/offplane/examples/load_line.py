"""Load what offplane line --ecsv writes: python3 load_line.py LINE.ecsv"""
import sys

import numpy as np
from astropy import units as u
from astropy.table import QTable

rows = QTable.read(sys.argv[1])
print(rows.colnames)
for row in rows:
    print(f"{row['n_e']:.2e} at {row['height'].to_value(u.R_sun):.2f} solar radii: ratio {row['ratio_1079_1074']:.3f}")
step = np.diff(np.log(rows["emissivity_1074"].value)) / np.diff(np.log(rows["n_e"].value))
print("d ln j / d ln n between rows:", np.round(step, 2))
