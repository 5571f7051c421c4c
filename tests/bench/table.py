# SPDX-License-Identifier: GPL-3.0-or-later
"""Table of ratios from the lines 'case program {json}' of run.sh. usage: table.py RESULTS JSON_OUT"""
import json
import statistics
import sys

times, facts = {}, {}
for line in open(sys.argv[1]):
    case, asked, text = line.split(" ", 2)
    result = json.loads(text)
    times.setdefault((case, asked), []).append(result["seconds"])
    facts[case, asked] = result
rows = []
for (case, asked), seconds in times.items():
    if asked == "numpy":
        continue
    base = times[case, "numpy"]
    ratios = [a / b for a, b in zip(base, seconds)]
    result = facts[case, asked]
    rows.append({"case": "P1 " + case, "rung": result["rung"], "asked": asked,
                 "baseline_seconds": statistics.median(base), "seconds": statistics.median(seconds),
                 "ratio": statistics.median(ratios), "ratio_low": min(ratios), "ratio_high": max(ratios),
                 "chi2": result["chi2"], "baseline_chi2": facts[case, "numpy"]["chi2"],
                 "evaluations": result["evaluations"]})
print(f"{'case':12} {'rung':7} {'numpy s':>8} {'engine ms':>10} {'ratio':>7} {'range':>13} {'chi2':>14} {'its chi2':>14}")
for r in rows:
    print(f"{r['case']:12} {r['rung']:7} {r['baseline_seconds']:8.3f} {1e3 * r['seconds']:10.3f} {r['ratio']:7.0f} "
          f"{r['ratio_low']:6.0f}-{r['ratio_high']:<6.0f} {r['baseline_chi2']:14.6f} {r['chi2']:14.6f}")
with open(sys.argv[2], "w") as out:
    json.dump(rows, out, indent=1)
