"""A difference that matters: did the trip change lift, or is it within what the test can tell?

Errors that both points share (here most of them) cancel in the difference; calling the points independent would
hide it.
"""

from pathlib import Path
from tempfile import TemporaryDirectory

import tapband
from tapband.files.starter import write_starter

with TemporaryDirectory() as folder:
    write_starter(Path(folder) / "demo")
    results = tapband.reduce(tapband.load(Path(folder) / "demo" / "campaign.toml"))

for a, b in (("R2/P12", "R1/P05"), ("R2/P08", "R1/P03")):
    table = results.compare(a, b).set_index("coefficient")
    row = table.loc["cl"]
    print(f"{a} minus {b}: cl {row.difference:+.4f} ± {row.U:.4f}, significant: {row.significant}")
    print(f"   called independent: ± {row.k * row.u_if_independent:.4f}; what is left: {row.remaining}")

# The same by hand, through numbers that keep their correlations.
tripped, clean = results.ufloats("R2/P12"), results.ufloats("R1/P05")
print("cl:", tripped["cl"] - clean["cl"])
print(
    "lift over pressure drag, ratio of the two:",
    (tripped["cl"] / tripped["cd_pressure"]) / (clean["cl"] / clean["cd_pressure"]),
)
