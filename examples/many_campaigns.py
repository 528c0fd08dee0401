"""Many campaigns in a loop: the same test with its sources one after the other at half their size.

Each campaign is a folder of its own; faults of one do not stop the others.
"""

import re
from pathlib import Path
from tempfile import TemporaryDirectory

import pandas as pd

import tapband
from tapband.files.starter import write_starter

CHANGES = {
    "as declared": ("", ""),
    "better scanner": ('limits = "0.03 % of full scale"', 'limits = "0.01 % of full scale"'),
    "better angle": ('standard = "0.03 deg"', 'standard = "0.01 deg"'),
    "a slip of the pen": ('standard = "0.03 deg"', 'standard = "0.03"'),
}
rows = []
with TemporaryDirectory() as folder:
    for name, (old, new) in CHANGES.items():
        campaign = Path(folder) / re.sub(r"\W+", "-", name) / "campaign.toml"
        write_starter(campaign.parent)
        # Linearised intervals need no trials; a small fixed number makes the loop quick.
        text = campaign.read_text().replace('trials = "auto"', "trials = 256")
        campaign.write_text(text.replace(old, new, 1) if old else text)
        try:
            results = tapband.reduce(tapband.load(campaign))
        except tapband.TapbandError as error:
            print(f"{name}: {error}")
            continue
        found = results.coefficients.set_index("point").loc["P05"]
        rows.append(
            {"campaign": name, "cl_U": found.cl_U, "cd_pressure_U": found.cd_pressure_U, "cm_U": found.cm_U}
        )
print(pd.DataFrame(rows).round(5).to_string(index=False))
