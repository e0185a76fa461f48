"""Load what offplane run (with --frames) leaves: python3 load_run.py FOLDER"""
import json
import sys

import numpy as np
import sunpy.map
from astropy import units as u
from astropy.io import fits
from astropy.table import QTable
from astropy.wcs import WCS

folder = sys.argv[1]

# Maps: true, inferred and their ratio, each with coordinates, observer and unit.
truth = {m.meta["extname"]: m for m in sunpy.map.Map(f"{folder}/truth.fits")}
inferred = {m.meta["extname"]: m for m in sunpy.map.Map(f"{folder}/inferred.fits")}
bias = {m.meta["extname"]: m for m in sunpy.map.Map(f"{folder}/bias.fits")}
field = inferred["B"]
west = field.pixel_to_world(0 * u.pix, 0 * u.pix).Tx
print(f"B in {field.unit}, from {west:.1f}, median {np.nanmedian(field.data):.2f}, true {np.nanmedian(truth['B_SKY'].data):.2f}")
print(f"inferred over true: {np.nanmedian(bias['B_RATIO'].data):.3f}")

# Why pixels have no value: bits of FLAG, named in its header.
flag = inferred["FLAG"]
for bit in range(32):
    name = flag.meta.get(f"flag{bit:02d}")
    if name and (count := int(np.count_nonzero(flag.data.astype(int) >> bit & 1))):
        print(f"{count:6d} pixels: {name}")

# The data: mean profiles and frames [time, wavelength, y, x], tunings, exposures.
with fits.open(f"{folder}/observation.fits") as f:
    frames, mean = f["LINE1"].data, f["LINE1_MEAN"].data
    tunings = f["TUNINGS"].data
    wavelength = tunings["wavelength_nm"][tunings["line"] == 1]
    times = f["EXPOSURES"].data["time_s"][f["EXPOSURES"].data["line"] == 1]
    sky = WCS(f["LINE1_MEAN"].header).celestial
print(f"frames {frames.shape} from {times[0]:.0f} to {times[-1]:.0f} s, {len(wavelength)} tunings from {wavelength[0]:.3f} nm, pixels of {sky.wcs.cdelt[0] * u.deg.to(u.arcsec):.2f} arcsec")
assert frames.shape[0] == len(times) and mean.shape[0] == len(wavelength)

# Doppler series, one row a pixel.
with fits.open(f"{folder}/series.fits") as f:
    rows, step = f["SERIES"].data, f["SERIES"].header["TIMESTEP"]
    print(f"{len(rows)} series of {rows['series'].shape[1]} values, {step} s apart, rms {rows['series'].std():.3f} km/s")

# The verdict: numbers by height with units, and all of it for programs.
table = QTable.read(f"{folder}/bias.ecsv")
for row in table:
    print(f"{row['height_from']:.2f} to {row['height_to']:.2f}: {row['valid']} of {row['pixels']} pixels, B {row['b']:.2f}, true {row['b_sky']:.2f}")
with open(f"{folder}/summary.json") as f:
    summary = json.load(f)
print(summary["scenario"], summary["scenario_sha256"][:12], summary["ratios"]["field"]["sky"]["median"])
with open(f"{folder}/run.json") as f:
    print({e["name"]: e["bytes"] for e in json.load(f)["files"]})
