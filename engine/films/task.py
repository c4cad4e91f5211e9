"""What is to be made of a film's scan."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from engine.amplitudes.corrections import Correction
from engine.amplitudes.negatives import NegativeRule
from engine.features.layers import BaselineKind
from engine.films.amplitudes import AmplitudeRule
from engine.films.facts import Fact
from engine.films.line_widths import Rule
from engine.films.scans import Scan
from engine.films.signs import DECISIVE, Criteria
from engine.resolution.envelope import Envelope
from engine.scattering import Composition
from engine.windows import NO_WINDOW, Window


@dataclass(frozen=True, slots=True, kw_only=True)
class Region:
    """A named part of the period, Å from the origin."""

    name: str
    start: float
    end: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Content:
    """What one repeat unit of the stack holds; with the period found it gives the mean density.

    Attributes
    ----------
    content : Composition
        Of a formula unit.
    area, area_sigma : float
        Å² of the plane per repeat unit.
    units : float
        Formula units in a repeat unit.
    """

    content: Composition
    area: float
    area_sigma: float = 0.0
    units: float = 1.0


@dataclass(frozen=True, slots=True, kw_only=True)
class FilmTask:
    """What is to be made of a scan.

    Attributes
    ----------
    scan : Scan
    period_range : (float, float) or None
        Where the period is looked for, Å; lines that carry orders need none.
    zero_shift, displacement : bool
        Fitted along with the period.
    radius : float or None
        Of the goniometer, mm.
    critical_q, refraction_density : float or None
        For refraction: q_c, or the mean density it follows from.
    corrections : tuple of Correction
    rule, negative : str
        See `engine.films.amplitudes.order_table`.
    keep_saturated : bool
    phases_deg : mapping of int to float, or None
        Given phases by order.
    criteria : Criteria or None
        By which signs are ranked, where phases are not given.
    fixed : mapping of int to ±1
        Signs known beforehand.
    rank : int
        Which sign set is used, 0 the first.
    decisive : float
    facts : tuple of Fact
        That make the scale absolute.
    content : Content or None
        A further fact: the mean density by composition.
    unit : str
        Of the density.
    samples : int
        Of the profile, over one period, its end included.
    window : Window
    baseline : str or float
    least_significance : float
        Of a layer, σ of its prominence.
    regions : tuple of Region
        To be integrated.
    area : float or None
        Å² of the plane per repeat unit: integrals are then told per unit too.
    envelope : Envelope or None
        Of unmeasured orders.
    instrument_width : float or None
        FWHM of the instrument, unit of the scan's positions; widths are analysed where the scan has any.
    instrument_rule : {"gaussian", "lorentzian"}
    """

    scan: Scan
    period_range: tuple[float, float] | None = None
    zero_shift: bool = False
    displacement: bool = False
    radius: float | None = None
    critical_q: float | None = None
    refraction_density: float | None = None
    corrections: tuple[Correction, ...] = ()
    rule: AmplitudeRule = "bayesian"
    negative: NegativeRule = "exclude"
    keep_saturated: bool = False
    phases_deg: Mapping[int, float] | None = None
    criteria: Criteria | None = None
    fixed: Mapping[int, int] = field(default_factory=dict)
    rank: int = 0
    decisive: float = DECISIVE
    facts: tuple[Fact, ...] = ()
    content: Content | None = None
    unit: str = "arbitrary"
    samples: int = 513
    window: Window = NO_WINDOW
    baseline: BaselineKind | float = "minima"
    least_significance: float = 3.0
    regions: tuple[Region, ...] = ()
    area: float | None = None
    envelope: Envelope | None = None
    instrument_width: float | None = None
    instrument_rule: Rule = "gaussian"
