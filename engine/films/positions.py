"""Where the orders of a layer stack appear in a scan, and the least squares of what moves them.

Inside the film q′ = 2πl/d. Outside, refraction by the mean density makes it q = √(q′² + q_c²), with
q_c = 4√(π r_e ρ) for X-rays and q_c = 4√(π Nb) for neutrons (Parratt, Phys. Rev. 95 (1954) 359; Als-Nielsen &
McMorrow, Elements of Modern X-ray Physics, 2nd ed. (2011), chapter 3). The instrument reads
2θ = 2 arcsin(qλ/4π) + z − 2 (s/R) cos θ, with a zero shift z and a sample displaced by s on a goniometer of
radius R (International Tables for Crystallography C, chapter 5.2).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy import optimize

from engine.arrays import BoolArray, FloatArray
from engine.errors import InputError
from engine.films.scans import PositionKind
from engine.scattering import Probe

ELECTRON_RADIUS = 2.8179403262e-5
"""Classical electron radius r_e, Å (CODATA 2018)."""
FARTHEST = 30.0
"""Of ln d, d in Å, in the model."""
ASTRAY = 0.5
"""Change of ln d in a refinement from which it has lost its way."""
INSEPARABLE = 1.0e10
"""Condition number of the normal equations of scaled parameters from which these are not told apart."""


def critical_square(mean_density: float, radiation: Probe) -> float:
    """q_c² = 16π r_e ρ (ρ in e/Å³) or 16π Nb (Nb in 10⁻⁶ Å⁻²), Å⁻²; absorption left out."""
    return 16 * math.pi * mean_density * (ELECTRON_RADIUS if radiation == "xray" else 1e-6)


@dataclass(frozen=True, slots=True)
class Model:
    """Positions of given orders (n,) as functions of ln d, zero shift and s/R."""

    kind: PositionKind
    wavelength: float | None
    order: FloatArray
    critical_square: float

    def radians(self, log_period: float, zero: float, ratio: float) -> tuple[FloatArray, FloatArray]:
        """Positions (n,), 2θ in radians or q, and their derivatives by ln d, z and s/R (n, 3)."""
        # Steps of a refinement may overshoot any period, total reflection, and backscattering.
        inner = 2 * math.pi * self.order * math.exp(min(max(-log_period, -FARTHEST), FARTHEST))
        q = np.sqrt(np.maximum(inner**2 + self.critical_square, 1e-60))
        by_log = -(inner**2) / q
        if self.wavelength is None:
            return q, np.stack([by_log, np.zeros_like(q), np.zeros_like(q)], axis=1)
        scale = self.wavelength / (4 * math.pi)
        sine = np.minimum(q * scale, 1 - 1e-12)
        theta = np.arcsin(sine)
        cosine = np.cos(theta)
        angle = 2 * theta + zero - 2 * ratio * cosine
        slopes = np.stack([(2 + 2 * ratio * sine) * scale / cosine * by_log, np.ones_like(q), -2 * cosine], axis=1)
        if self.kind == "two_theta":
            return angle, slopes
        return np.sin(angle / 2) / scale, slopes * (np.cos(angle / 2) / (2 * scale))[:, None]

    def possible(self, log_period: float) -> bool:
        """Whether all orders have an angle: neither imaginary q (a negative density) nor sin θ above 1."""
        square = (2 * math.pi * self.order * math.exp(-log_period)) ** 2 + self.critical_square
        limit = math.inf if self.wavelength is None else 4 * math.pi / self.wavelength
        return bool((square > 0).all() and (square <= limit**2 * (1 + 1e-9)).all())

    def positions(self, log_period: float, zero: float, ratio: float) -> tuple[FloatArray, FloatArray]:
        """The same with 2θ in degrees."""
        found, slopes = self.radians(log_period, zero, ratio)
        return (np.degrees(found), np.degrees(slopes)) if self.kind == "two_theta" else (found, slopes)


def refine(
    model: Model, measured: FloatArray, spread: FloatArray, start: FloatArray, wanted: BoolArray
) -> tuple[FloatArray, FloatArray]:
    """All three parameters, and the weighted Jacobian (n, p) of those that were refined.

    Raises
    ------
    InputError
        The refinement does not converge or goes astray.
    """

    def full(values: FloatArray) -> FloatArray:
        parameters = start.copy()
        parameters[wanted] = values
        return parameters

    def misfit(values: FloatArray) -> FloatArray:
        return (model.radians(*full(values))[0] - measured) / spread

    def slopes(values: FloatArray) -> FloatArray:
        return np.asarray(model.radians(*full(values))[1][:, wanted] / spread[:, None])

    fit = optimize.least_squares(
        misfit, start[wanted], slopes, method="lm", x_scale="jac", xtol=1e-14, ftol=1e-14, gtol=1e-14
    )
    found = full(fit.x)
    strays = abs(found[0] - start[0]) > ASTRAY or not np.isfinite(found).all()
    if fit.status <= 0 or strays or not model.possible(found[0]):
        raise InputError(
            "orders", "fit no period with these parameters", "check orders and positions, or refine fewer parameters"
        )
    return found, slopes(fit.x)


def covariance_of(jacobian: FloatArray, names: tuple[str, ...]) -> FloatArray:
    """(JᵀJ)⁻¹ of a weighted Jacobian, (n, p) -> (p, p).

    Raises
    ------
    InputError
        Parameters that the orders do not tell apart.
    """
    norms = np.linalg.norm(jacobian, axis=0)
    _, singular, turn = np.linalg.svd(jacobian / norms, full_matrices=False)
    if singular[0] ** 2 > INSEPARABLE * singular[-1] ** 2:
        raise InputError(
            "orders",
            f"do not tell {' and '.join(names)} apart",
            "refine fewer parameters, or add orders at other angles",
        )
    half = turn.T / singular / norms[:, None]
    return np.asarray(half @ half.T)
