"""Check 4: silver behenate, the standard of small angles, as a film's scan."""

from __future__ import annotations

import numpy as np
import pytest

from engine.films.assignment import assign
from engine.films.scans import Scan
from engine.films.spacing import fit_spacing

CU_K_ALPHA_1 = 1.5405929
"""Å, of the certificates of checks 1 and 2."""
PERIOD = 58.380
"""Å; Huang et al., J. Appl. Cryst. 26 (1993) 180, memory."""
FIRST_Q = 0.10763
"""Å⁻¹, from the same."""
# 2θ of 001 in degrees: Bragg's law, λ = 2d sin θ, with the two numbers above.
FIRST_ANGLE = 1.5120


def test_the_first_order_in_q_gives_the_period():
    found = fit_spacing(Scan.of(q=[FIRST_Q], order=[1]), [1])
    # Half a unit of the last digit of q.
    assert found.period == pytest.approx(PERIOD, abs=PERIOD * 0.5e-5 / FIRST_Q)


def test_angles_of_the_first_orders_give_the_period_and_back():
    orders = np.arange(1, 14)
    angles = np.round(np.degrees(2 * np.arcsin(orders * CU_K_ALPHA_1 / (2 * PERIOD))), 4)
    scan = Scan.of(two_theta_deg=angles, wavelength=CU_K_ALPHA_1, position_sigma=np.full(13, 1e-4))
    assert assign(scan)[0].order.tolist() == orders.tolist()
    found = fit_spacing(scan, orders)
    assert found.period == pytest.approx(PERIOD, abs=0.5e-3)
    assert found.positions(np.array([1]))[0] == pytest.approx(FIRST_ANGLE, abs=1e-4)
    assert found.outer_q(np.array([1]))[0] == pytest.approx(FIRST_Q, abs=0.5e-5)
