"""Sizing a scanner: which range, which error limits are good enough, before anything is bought.

The forecast of the starter campaign (inviscid pressures) is reduced with each option in its place; targets, options
and costs stand in the campaign file.
"""

from pathlib import Path
from tempfile import TemporaryDirectory

import tapband
from tapband.files.starter import write_starter

with TemporaryDirectory() as folder:
    path = Path(folder) / "demo" / "campaign.toml"
    write_starter(path.parent)
    # Two angles, and no search for better places of the taps or a better wiring: quick answers first.
    text = path.read_text().partition("[layout]")[0]
    path.write_text(
        text.replace('alpha = ["-4 deg", "0 deg", "4 deg", "8 deg"]', 'alpha = ["0 deg", "8 deg"]')
    )
    plan = tapband.size(tapband.load(path))

print(*plan.notes, sep="\n")
print(plan.options[["slot", "option", "cost", "eligible", "chosen", "reason"]].to_string(index=False))
print(plan.frontier.to_string(index=False))

# How large each source may be with all others as declared.
print(plan.allowances[["source", "declared", "allowed", "unit", "headroom"]].to_string(index=False))
