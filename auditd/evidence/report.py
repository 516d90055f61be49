"""Put a fitted comparison into the fields and words of the result."""

from __future__ import annotations

from dataclasses import dataclass

from auditd.evidence.anytime import critical
from auditd.evidence.clustered import Clustered
from auditd.evidence.crossing import NuisanceCrossing
from auditd.evidence.fit import OwnDifferences
from auditd.evidence.interaction import FOUND
from auditd.evidence.naive import Naive
from auditd.evidence.result import Contrast
from auditd.evidence.solution import Solution

DOMINATES = (
    0.7  # share of the half-width (half of the variance) from which the levels' differences are most of it
)
WEAK_RUNS = 10.0  # effective runs a side below which a comparison is called weak


@dataclass(frozen=True, kw_only=True)
class Scene:
    """What every way of comparing shares: the naive result, the scale, counts, confidence, remarks."""

    naive: Naive | None
    scale: float
    n: int
    confidence: float
    sides: tuple[int, int]
    remarks: tuple[str, ...]


@dataclass(frozen=True, kw_only=True)
class Measured:
    """An estimate with its interval and its variance relative to independence, on the scale of the fit.

    floor : half-width that further runs on the same levels of floor_of leave.
    """

    estimate: float
    half: float
    df: float
    variance: float
    inflation: float
    inflation_low: float
    inflation_high: float
    floor: float = 0.0
    floor_of: str | None = None
    remarks: tuple[str, ...] = ()


def aliased(scene: Scene, reason: str) -> Contrast:
    """A comparison that cannot be estimated; the naive interval is shown for what it is."""
    naive = scene.naive
    return Contrast(
        estimate=None,
        low=None,
        high=None,
        low_any=None,
        high_any=None,
        df=None,
        method="none",
        estimable=False,
        reason=reason,
        n=scene.n,
        n_effective=None,
        loss=None,
        loss_low=None,
        loss_high=None,
        naive_low=None if naive is None else naive.low * scene.scale,
        naive_high=None if naive is None else naive.high * scene.scale,
        hedges_g=None,
        g_low=None,
        g_high=None,
        confidence=scene.confidence,
        weak=True,
        remarks=scene.remarks,
    )


def solved(
    solution: Solution, scene: Scene, method: str, crossings: tuple[NuisanceCrossing, ...]
) -> Contrast:
    """Words and figures of a fit by columns or by pairs."""
    independent, sd2 = _independent(scene)
    marginal = 1.0 if independent is None else independent
    inflation = solution.variances / marginal
    if "blocks" not in method:
        inflation = inflation / (solution.marginals / sd2).clip(min=1.0)
    tail = (1 - scene.confidence) / 2
    low, middle, high = _scatter_range(solution, tail)
    measured = Measured(
        estimate=solution.estimate,
        half=solution.half,
        df=solution.df,
        variance=solution.quantile(solution.variances, 0.5) * middle,
        inflation=solution.quantile(inflation, 0.5) * middle,
        inflation_low=solution.quantile(inflation, tail) * low,
        inflation_high=solution.quantile(inflation, 1 - tail) * high,
        floor=_floor(solution),
        floor_of=None if solution.interaction is None else solution.interaction.name,
        remarks=tuple(_of_few(one) for one in solution.own),
    )
    words = [method]
    if solution.order:
        words = [f"{method}, AR({solution.order}), first coefficient {solution.phi:.2f}"]
    words += [f"{c.name} as {'block' if c.kind == 'block' else 'random effect'}" for c in crossings]
    if solution.interaction is not None:
        words.append(f"{solution.interaction.name} × cell as error")
    return _filled(measured, scene, "; ".join(words))


def _floor(solution: Solution) -> float:
    """Half-width that the levels' own differences alone make."""
    found = solution.interaction
    if found is None or found.floor <= 0:
        return 0.0
    return float(solution.half * (found.floor / found.variance) ** 0.5)


def _of_few(one: OwnDifferences) -> str:
    """What the comparison says about a nuisance of few levels, and what it cannot say."""
    name, n_levels = one.crossing.name, one.crossing.codes.n_levels
    claim = f"{name}: the claim is for these {n_levels} levels as the runs weigh them"
    if one.pvalue < FOUND:
        return (
            f"{claim}, and the difference itself is not the same on them (F = {one.f:.3g}, p = "
            f"{one.pvalue:.2g}): compare on each apart"
        )
    return f"{claim}; whether the difference itself depends on {name} cannot be judged from {n_levels}"


def _scatter_range(solution: Solution, tail: float) -> tuple[float, float, float]:
    """What the levels' own differences do to the variance: lower end, middle (1 unless found), upper end."""
    from scipy.special import chdtri

    if solution.interaction is None:
        return 1.0, 1.0, 1.0
    df = solution.scatter_df
    middle = solution.scatter if solution.interaction.pvalue < FOUND else 1.0
    low = solution.scatter * df / float(chdtri(df, tail))
    high = solution.scatter * df / float(chdtri(df, 1 - tail))
    return min(low, middle), middle, max(high, middle)


def clustered(found: Clustered, scene: Scene, name: str) -> Contrast:
    """Words and figures of a fit by clusters."""
    from scipy.special import chdtri, stdtrit

    independent, _ = _independent(scene)
    inflation = found.variance / (independent or found.variance)
    tail = (1 - scene.confidence) / 2
    measured = Measured(
        estimate=found.estimate,
        half=float(stdtrit(found.df, 1 - tail)) * found.variance**0.5,
        df=found.df,
        variance=found.variance,
        inflation=inflation,
        inflation_low=inflation * found.df / float(chdtri(found.df, tail)),
        inflation_high=inflation * found.df / float(chdtri(found.df, 1 - tail)),
    )
    return _filled(
        measured,
        scene,
        f"{name} as clusters, exchangeable within ({found.icc:.2f}), variance from their sums",
    )


def _independent(scene: Scene) -> tuple[float | None, float]:
    """Variance of the difference if runs were independent, and variance of one run."""
    naive = scene.naive
    if naive is None or naive.variance <= 0:
        return None, 1.0
    return naive.variance, naive.sd**2


def _filled(measured: Measured, scene: Scene, method: str) -> Contrast:
    """All fields of an estimable comparison, back on the scale of the values."""
    scale, naive = scene.scale, scene.naive
    n_effective = scene.n / max(measured.inflation, 1e-12)
    normal = _two_sided_z(scene.confidence)
    half_any = measured.half * critical(min(n_effective, scene.n), scene.confidence) / normal
    g, g_half = _standardised(measured, naive, scene.confidence)
    weak = min(scene.sides) / scene.n * n_effective < WEAK_RUNS
    remarks = scene.remarks + measured.remarks
    if measured.floor > DOMINATES * measured.half:
        remarks += (_more_levels(str(measured.floor_of)),)
    remarks += ("weak: fewer than 10 effective runs a side",) if weak else ()
    return Contrast(
        estimate=measured.estimate * scale,
        low=(measured.estimate - measured.half) * scale,
        high=(measured.estimate + measured.half) * scale,
        low_any=(measured.estimate - half_any) * scale,
        high_any=(measured.estimate + half_any) * scale,
        df=measured.df,
        method=method,
        estimable=True,
        reason=None,
        n=scene.n,
        n_effective=n_effective,
        loss=1 - 1 / max(measured.inflation, 1e-12),
        loss_low=1 - 1 / max(measured.inflation_low, 1e-12),
        loss_high=1 - 1 / max(measured.inflation_high, 1e-12),
        naive_low=None if naive is None else naive.low * scale,
        naive_high=None if naive is None else naive.high * scale,
        hedges_g=g,
        g_low=None if g is None else g - g_half,
        g_high=None if g is None else g + g_half,
        confidence=scene.confidence,
        weak=weak,
        floor=measured.floor * scale,
        floor_of=measured.floor_of if measured.floor > 0 else None,
        remarks=remarks,
    )


def _more_levels(name: str) -> str:
    return (
        f"{name} × cell: most of the interval is what the levels of {name} differ in; more levels narrow it, "
        "more runs on these hardly do"
    )


def _two_sided_z(confidence: float) -> float:
    from scipy.special import ndtri

    return float(ndtri(0.5 + confidence / 2))


def _standardised(measured: Measured, naive: Naive | None, confidence: float) -> tuple[float | None, float]:
    """Hedges' g with an interval whose variance is the honest one plus that of the standard deviation.

    References
    ----------
    Hedges (1981), Journal of Educational Statistics 6:107-128; Hedges & Olkin (1985), Statistical Methods
    for Meta-Analysis, section 5.
    """
    from scipy.special import gammaln, stdtrit

    if naive is None or naive.sd <= 0:
        return None, 0.0
    df = naive.sd_df
    exact = float(gammaln(df / 2) - gammaln((df - 1) / 2)) if df > 1 else 0.0
    correction = float((2 / df) ** 0.5 * 2.718281828459045**exact) if df > 1 else 1.0
    g = correction * measured.estimate / naive.sd
    t = float(stdtrit(measured.df, 0.5 + confidence / 2))
    variance = (correction * measured.half / naive.sd / t) ** 2 + g * g / (2 * df)
    return g, t * variance**0.5
