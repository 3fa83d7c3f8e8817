"""Variograms, their fits, and the soil that a sample stands for."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from schorl.model.arrays import Floats, lock

Family = Literal["spherical", "exponential", "matern32"]

#: Practical range over scale: the spherical's scale is its range; the exponential reaches 95 % of
#: its partial sill at 3 scales (1 - exp(-3) = 0.950); the Matérn of smoothness 3/2 with
#: correlation (1 + s) exp(-s), s = sqrt(3) h / scale, at 2.7389 scales.
RANGE_OVER_SCALE = {"spherical": 1.0, "exponential": 3.0, "matern32": 2.738921}
SampleKind = Literal["point", "cores", "zone"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Variogram:
    """A variogram by keyword only, so that no convention is guessed.

    The covariance at distance h > 0 is ``partial_sill`` times the family's correlation; at h = 0
    the nugget comes on top.

    ==============  =====================================================  =======================
    family          correlation at distance h                              scale
    ==============  =====================================================  =======================
    spherical       1 - 1.5 u + 0.5 u³, u = h / scale; 0 beyond            practical range
    exponential     exp(-h / scale)                                        practical range / 3
    matern32        (1 + s) exp(-s), s = sqrt(3) h / scale                 practical range / 2.7389
    ==============  =====================================================  =======================

    Parameters
    ----------
    family
        "spherical", "exponential" or "matern32".
    nugget
        Variance at distance zero, laboratory share included, in squared units of the values.
    partial_sill
        Variance of the structured part, in squared units of the values.
    practical_range_m
        Range of the spherical; three scales of the exponential; where the Matérn reaches 95 %.
    lab_variance
        The laboratory's share of the nugget, 0 to ``nugget``. The noise of sample i is
        ``lab_variance + (nugget - lab_variance) k0 / ki`` with k0 the median number of cores.
    stretch, stretch_deg
        Geometric anisotropy: distances across the direction ``stretch_deg`` (degrees from north,
        clockwise) count ``stretch`` times; 1 is isotropic.
    """

    family: Family
    nugget: float
    partial_sill: float
    practical_range_m: float
    lab_variance: float = 0.0
    stretch: float = 1.0
    stretch_deg: float = 0.0

    def __post_init__(self) -> None:
        if self.family not in RANGE_OVER_SCALE:
            raise ValueError(f"no variogram family `{self.family}`")
        if not (self.nugget >= 0 and self.partial_sill >= 0 and self.practical_range_m > 0):
            raise ValueError(
                f"nugget {self.nugget:g} and partial sill {self.partial_sill:g} must not be "
                f"negative, practical range {self.practical_range_m:g} m must be above 0"
            )
        if not 0 <= self.lab_variance <= self.nugget * (1 + 1e-12):
            raise ValueError(
                f"laboratory variance {self.lab_variance:g} is not within the nugget "
                f"{self.nugget:g}"
            )

    @property
    def scale_m(self) -> float:
        """The family's raw scale (see the table above)."""
        return self.practical_range_m / RANGE_OVER_SCALE[self.family]

    @property
    def micro_variance(self) -> float:
        """Real short-range variation: the nugget without the laboratory's share."""
        return max(self.nugget - self.lab_variance, 0.0)


@dataclass(frozen=True, eq=False, kw_only=True)
class VariogramFit:
    """A variogram fitted by residual maximum likelihood.

    ``log_likelihood`` is the restricted log-likelihood without priors,
    -1/2 [(n-1) log(2 pi s²) + log|R| + log(1'R⁻¹1) + q/s²]. ``verdict`` says in one of the words
    of ``schorl.model.surface.Verdict`` how far it may be trusted. ``lag_m``, ``semivariance`` and
    ``pairs`` hold the empirical variogram, for the eye only.
    """

    family: Family
    nugget: float
    partial_sill: float
    practical_range_m: float
    mean: float
    log_likelihood: float
    verdict: str
    lab_variance: float = 0.0
    stretch: float = 1.0
    stretch_deg: float = 0.0
    transform: str = "identity"
    reason: str = ""
    lag_m: Floats | tuple[float, ...] = ()
    semivariance: Floats | tuple[float, ...] = ()
    pairs: Floats | tuple[float, ...] = ()

    def __post_init__(self) -> None:
        lock(self, lag_m=self.lag_m, semivariance=self.semivariance, pairs=self.pairs)

    @property
    def structured_share(self) -> float:
        """Partial sill over the whole variance."""
        total = self.nugget + self.partial_sill
        return self.partial_sill / total if total > 0 else 0.0

    @property
    def variogram(self) -> Variogram:
        """The fitted variogram as kriging takes it."""
        return Variogram(
            family=self.family,
            nugget=self.nugget,
            partial_sill=self.partial_sill,
            practical_range_m=self.practical_range_m,
            lab_variance=min(self.lab_variance, self.nugget),
            stretch=self.stretch,
            stretch_deg=self.stretch_deg,
        )


@dataclass(frozen=True, eq=False, slots=True)
class Support:
    """The soil that one sample stands for.

    Parameters
    ----------
    points_m
        East and north, shape ``(m, 2)``: the point itself (m = 1), the positions of the cores, or
        a few dozen points that fill a sample zone.
    cores
        Number of cores in the composite.
    kind
        "point", "cores" (cores at just these positions) or "zone" (cores at random in the zone).
    """

    points_m: Floats
    cores: int
    kind: SampleKind

    def __post_init__(self) -> None:
        lock(self, points_m=self.points_m)
