"""Load an error budget: python3 load_budget.py FOLDER"""
import json
import sys

from astropy.table import QTable

folder = sys.argv[1]
with open(f"{folder}/budget.json") as f:
    budget = json.load(f)

# ln(B/B_SKY): what the method costs, and what every assumption adds.
parts = [budget["method"], *budget["terms"]]
for part in parts:
    print(f"{part['key']:24s} {part['field']['share']:+.4f}")
total = budget["total"]["field"]["share"]
print(f"{'total':24s} {total:+.4f}")
assert abs(sum(part["field"]["share"] for part in parts) - total) < 1e-9

table = QTable.read(f"{folder}/budget.ecsv")
print(table.colnames, len(table))
