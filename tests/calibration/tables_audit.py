"""Make tests/calibration/tables/audit.md: `python tests/calibration/tables_audit.py [campaigns]`.

How often the full audit finds dependence in exchangeable campaigns, by law and layout; about 6 minutes of
one core at 2,000 campaigns of the first setting.
"""

import pathlib
import sys
from collections import Counter

sys.path.insert(0, str(pathlib.Path(__file__).parents[1]))

from audit_campaigns import LAWS, SETTINGS, found_anything

N_CAMPAIGNS = 2_000
SHARES = (1.0, 0.5, 0.25)
"""Of the campaigns, by setting: those with permutations take ten times as long."""
TABLE = pathlib.Path(__file__).parent / "tables" / "audit.md"
HEAD = """# False positives of the full audit

Exchangeable campaigns; counted when any Holm-adjusted p-value about dependence of the response is below 0.05.
At most 5 % + 1.96 binomial standard errors ({bound:.2f} % at {n:,} campaigns) is asked for.
Made by `python tests/calibration/tables_audit.py {n}`; a subset is run by the tests.

| campaign | law | campaigns | any | largest single check |
|---|---|---:|---:|---|
"""


def main(n_campaigns):
    """Write the table."""
    bound = 100 * (0.05 + 1.96 * (0.05 * 0.95 / n_campaigns) ** 0.5)
    lines = []
    for setting, part in zip(SETTINGS, SHARES, strict=True):
        for law in LAWS:
            n = round(part * n_campaigns)
            found = [found_anything(setting, law, number) for number in range(n)]
            share = sum(map(bool, found)) / n
            by_check = Counter(name for names in found for name in names)
            name, count = by_check.most_common(1)[0] if by_check else ("none", 0)
            single = f"{name}: {count / n:.2%}"
            lines.append(f"| {setting} | {law} | {n:,} | {share:.2%} | {single} |")
            print(lines[-1], flush=True)
            TABLE.parent.mkdir(exist_ok=True)
            TABLE.write_text(HEAD.format(n=n_campaigns, bound=bound) + "\n".join(lines) + "\n")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else N_CAMPAIGNS)
