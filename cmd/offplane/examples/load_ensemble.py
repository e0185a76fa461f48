"""Load the folder of an ensemble: python3 load_ensemble.py FOLDER"""
import glob
import sys

import numpy as np
from astropy.io import fits
from astropy.table import QTable

folder = sys.argv[1]

# The index: one row a member, its parameters with units.
index = QTable.read(f"{folder}/members.ecsv")
print(index.colnames)

# A member: features and truths of the pixels with a field.
for path in sorted(glob.glob(f"{folder}/members/*/member.fits")):
    pixels = QTable.read(path, hdu="PIXELS")
    with fits.open(path) as f:
        number = f[0].header["MEMBER"]
        parameters = dict(zip(f["PARAMETERS"].data["path"], f["PARAMETERS"].data["value"]))
        scenario = f["SCENARIO"].data["yaml"][0].tobytes().decode()
    ratio = (pixels["B"] / pixels["B_SKY"]).to_value("")
    print(number, parameters, len(pixels), f"pixels, B over B_SKY {np.nanmedian(ratio):.3f};", scenario.splitlines()[0])
