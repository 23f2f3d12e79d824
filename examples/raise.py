"""Prints a message for each surprising row: seqmix follow ... --format jsonl | python3 raise.py"""

import json
import sys

for line in sys.stdin:
    row = json.loads(line)
    if row["surprise"]:
        told = row["forecast"] or {}
        expected = round(told["median"], 2) if "median" in told else told.get("top")
        print(f"{row['time']}: {row['value']!r}, expected {expected!r}, p-value {row['p_value']:.2g}", flush=True)
