"""Load the plan of a campaign: python3 load_plan.py FOLDER"""
import json
import sys

import numpy as np
from astropy.table import QTable

folder = sys.argv[1]

# Every design: what it asks for, its hours, its errors as fractions.
designs = QTable.read(f"{folder}/plan.ecsv")
print(designs.colnames)
best = np.argmin(designs["random"])
print(f"{len(designs)} designs, the least random error {designs['random'][best]:.3f} after {designs['hours'][best]:.1f}")

# The answer for programs; recommended is null if no design meets the goal.
with open(f"{folder}/plan.json") as f:
    plan = json.load(f)
choice = plan["recommended"] or plan["nearest"]
print("met" if plan["met"] else "not met", choice["values"], choice["predicted"])
with open(f"{folder}/plan.txt") as f:
    print(f.readline().strip())
