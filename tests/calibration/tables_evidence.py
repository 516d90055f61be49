"""The complete calibration tables of auditd.evidence: `python tests/calibration/tables_evidence.py
[campaigns a setting]`."""

import pathlib
import sys
import time
from collections.abc import Iterator

import numpy as np
from campaigns_evidence import autoregressive, builds, hosts, known_half_ar, paired, serial

from auditd.evidence import contrast, effective_number

N_CAMPAIGNS = 2000
N_SEQUENCE = 400
N_LOOKS = 40
PLACE = pathlib.Path(__file__).parent / "tables" / "evidence.md"


def measure(draw, n_campaigns, seed):
    """Coverage, mean width over the known and over the naive interval's, coverage of the naive one, mean
    effective number."""
    rng = np.random.default_rng(seed)
    held = held_naive = 0
    widths, naive, effective = [], [], []
    for _ in range(n_campaigns):
        c = draw(rng)
        nuisance = {} if c.host is None else {"host": c.host}
        r = contrast(c.values, cells=c.cells, a=0, b=1, nuisance=nuisance, blocks=c.block)
        if not r.estimable:
            continue
        held += r.low <= 0 <= r.high
        held_naive += r.naive_low <= 0 <= r.naive_high
        widths.append((r.high - r.low) / 2 / c.known_half)
        naive.append((r.high - r.low) / (r.naive_high - r.naive_low))
        effective.append(r.n_effective)
    n = len(widths)
    return (
        held / n,
        float(np.mean(widths)),
        float(np.mean(naive)),
        held_naive / n,
        float(np.median(effective)),
    )


def serial_rows(n_campaigns):
    """A difference of two cells under AR(1) errors."""
    yield "| n | φ | order | coverage | level | width ÷ known | n_eff | level | ÷ naive | naive coverage |"
    yield "|---|---|---|---|---|---|---|---|---|---|"
    for n in (60, 200, 400):
        for phi in (0.0, 0.3, 0.6, 0.9):
            for order in ("A then B", "randomised"):
                covered, width, naive, plain, _ = measure(
                    lambda rng, n=n, phi=phi, order=order: serial(rng, n, phi, order),
                    n_campaigns,
                    [1, n, int(phi * 10)],
                )
                cells = np.repeat([0, 1], n // 2)
                if order == "randomised":
                    np.random.default_rng(0).shuffle(cells)
                true = n * (2 * 1.959964 / np.sqrt(n) / known_half_ar(cells, phi)) ** 2
                wanted = "1.15" if true > 20 else "–"
                share = {0.6: " (0.75)", 0.9: " (0.45)"}.get(phi, "") if order == "randomised" else ""
                yield (
                    f"| {n} | {phi} | {order} | {covered:.3f} | {0.92 if n == 60 else 0.93} | {width:.3f} "
                    f"| {true:.0f} | {wanted} | {naive:.3f}{share} | {plain:.3f} |"
                )


def host_rows(n_campaigns):
    """Host effects, n = 200."""
    yield "| hosts | ICC | host × cell | crossing | coverage | level | width ÷ known | naive coverage |"
    yield "|---|---|---|---|---|---|---|---|"
    for n_hosts in (3, 4, 8, 16):
        for icc in (0.0, 0.1, 0.3):
            for own in (0.0, 0.1):
                for crossing in ("even", "uneven"):
                    covered, width, _, plain, _ = measure(
                        lambda rng, a=(n_hosts, icc, own, crossing): hosts(rng, 200, *a),
                        n_campaigns,
                        [2, n_hosts, int(icc * 10), int(own * 10)],
                    )
                    level = 0.92 if own else (0.91 if n_hosts <= 4 else 0.93)
                    yield (
                        f"| {n_hosts} | {icc} | {own} | {crossing} | {covered:.3f} | {level} | {width:.3f} "
                        f"| {plain:.3f} |"
                    )


def build_rows(n_campaigns):
    """Two builds, n = 200: a claim about these builds. ICC 0.1."""
    yield "| builds | build × cell | crossing | coverage | level | width ÷ known | ÷ naive | naive coverage |"
    yield "|---|---|---|---|---|---|---|---|"
    for own in (0.0, 0.1, 0.5):
        for crossing in ("even", "uneven"):
            covered, width, naive, plain, _ = measure(
                lambda rng, a=(2, 0.1, own, crossing): builds(rng, 200, *a), n_campaigns, [7, int(own * 10)]
            )
            yield (
                f"| 2 | {own} | {crossing} | {covered:.3f} | 0.93 | {width:.3f} | {naive:.3f} | {plain:.3f} |"
            )


def block_rows(n_campaigns):
    """Seed blocks: width over that of the paired t interval (level 1.10), and coverage also under AR(1)
    errors."""
    yield "| n | ρ | φ | order | coverage | width ÷ paired t | naive coverage |"
    yield "|---|---|---|---|---|---|---|"
    for n in (60, 200, 400):
        for rho in (0.2, 0.5, 0.8):
            for phi, order in ((0.0, "randomised"), (0.6, "randomised"), (0.6, "A then B")):
                covered, width, _, plain, _ = measure(
                    lambda rng, a=(n, rho, phi, order): paired(rng, *a),
                    n_campaigns,
                    [3, n, int(rho * 10), int(phi * 10)],
                )
                yield f"| {n} | {rho} | {phi} | {order} | {covered:.3f} | {width:.3f} | {plain:.3f} |"


def looks(rng, n, phi, order, first):
    """Whether all looks held, at any time and fixed, and the ratio of widths at the end."""
    values = autoregressive(rng, n, phi)
    cells = rng.integers(0, 2, n) if order == "randomised" else (np.arange(n) // 10) % 2
    always = fixed = True
    ratio = 0.0
    for k in np.unique(np.geomspace(first, n, N_LOOKS).astype(int)):
        r = contrast(values[:k], cells=cells[:k], a=0, b=1)
        always &= r.low_any <= 0 <= r.high_any
        fixed &= r.low <= 0 <= r.high
        ratio = (r.high_any - r.low_any) / (r.high - r.low)
    return always, fixed, ratio


def sequence_rows(n_campaigns):
    """Forty looks, evenly spaced in log n from 30 effective runs to the end."""
    yield "| n | φ | order | all looks hold | level | fixed intervals | width ÷ fixed at the end | level |"
    yield "|---|---|---|---|---|---|---|---|"
    for n, phi, order, first in (
        (100, 0.0, "randomised", 30),
        (400, 0.0, "randomised", 30),
        (800, 0.0, "randomised", 30),
        (400, 0.6, "randomised", 30),
        (400, 0.9, "randomised", 30),
        (600, 0.6, "tens in turn", 60),
    ):
        rng = np.random.default_rng([4, n, int(phi * 10)])
        found = np.array([looks(rng, n, phi, order, first) for _ in range(n_campaigns)], dtype=float).mean(
            axis=0
        )
        yield f"| {n} | {phi} | {order} | {found[0]:.3f} | 0.94 | {found[1]:.3f} | {found[2]:.3f} | 1.6 |"


def number_rows(n_campaigns):
    """effective_number under AR(1), n = 1,000, one cell."""
    yield "| φ | n(1−φ)/(1+φ) | mean | mean ÷ truth | level | interval covers | level |"
    yield "|---|---|---|---|---|---|---|"
    for phi in (0.0, 0.1, 0.3, 0.6, 0.9):
        rng = np.random.default_rng([5, int(phi * 10)])
        true = 1000 * (1 - phi) / (1 + phi)
        found, held = [], 0
        for _ in range(n_campaigns):
            r = effective_number(autoregressive(rng, 1000, phi), cells=np.zeros(1000, dtype=int))
            found.append(r.n_effective)
            held += r.loss_low <= 1 - true / 1000 <= r.loss_high
        mean = float(np.mean(found))
        share = held / n_campaigns
        yield f"| {phi} | {true:.0f} | {mean:.1f} | {mean / true:.3f} | 0.9–1.1 | {share:.3f} | 0.9 |"


def level_rows(n_campaigns):
    """effective_number under host effects: two cells, 960 runs, against Kish's design effect."""
    yield "| hosts | ICC | truth | median | mean loss | true loss | interval covers |"
    yield "|---|---|---|---|---|---|---|"
    for n_hosts in (4, 16, 64):
        for icc in (0.0, 0.1, 0.5):
            rng = np.random.default_rng([6, n_hosts, int(icc * 10)])
            found, held, truths = [], 0, []
            for _ in range(n_campaigns):
                host, cells = rng.permutation(np.arange(960) % n_hosts), rng.integers(0, 2, 960)
                values = np.sqrt(1 - icc) * rng.standard_normal(960)
                values += np.sqrt(icc) * rng.standard_normal(n_hosts)[host]
                true = sum(kish(host[cells == side], icc) for side in (0, 1))
                r = effective_number(values, cells=cells, nuisance={"host": host})
                found.append(r.n_effective)
                truths.append(true)
                held += r.loss_low - 1e-9 <= 1 - true / 960 <= r.loss_high + 1e-9
            loss, lost = 1 - np.mean(found) / 960, 1 - np.mean(truths) / 960
            yield (
                f"| {n_hosts} | {icc} | {np.mean(truths):.0f} | {np.median(found):.0f} | {loss:.3f} "
                f"| {lost:.3f} | {held / n_campaigns:.3f} |"
            )


def kish(host, icc):
    """Effective number of one cell's runs under an intraclass correlation (Kish 1965, section 8.2)."""
    n = len(host)
    return n / (1 + (float((np.bincount(host) ** 2).sum()) / n - 1) * icc)


def document(n_campaigns) -> Iterator[str]:
    """The page, line by line."""
    yield "# Calibration of auditd.evidence"
    yield ""
    yield f"By `python tests/calibration/tables_evidence.py`; {n_campaigns} campaigns a setting unless said."
    yield "Nominal level 95 %. A share of 0.95 has a standard error of 0.005 at 2,000 campaigns."
    fewer = min(n_campaigns, N_SEQUENCE)
    for title, rows in (
        ("Serial errors: difference of two cells", serial_rows(n_campaigns)),
        ("Hosts: difference of two cells, 200 runs", host_rows(n_campaigns)),
        ("Two builds: difference of two cells over these builds, 200 runs", build_rows(n_campaigns)),
        ("Seed blocks", block_rows(n_campaigns)),
        (f"Confidence sequence, {N_LOOKS} looks, {fewer} campaigns", sequence_rows(fewer)),
        ("Effective number, AR(1)", number_rows(n_campaigns)),
        ("Effective number, hosts", level_rows(min(n_campaigns, N_SEQUENCE))),
    ):
        yield ""
        yield f"## {title}"
        yield ""
        start = time.process_time()
        yield from rows
        print(f"{title}: {time.process_time() - start:.0f} s of processor time", file=sys.stderr, flush=True)


def main(n_campaigns: int = N_CAMPAIGNS) -> None:
    """Write tests/calibration/tables/evidence.md, line by line."""
    PLACE.parent.mkdir(exist_ok=True)
    with PLACE.open("w", encoding="utf-8") as page:
        for line in document(n_campaigns):
            page.write(line + "\n")
            page.flush()


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else N_CAMPAIGNS)
