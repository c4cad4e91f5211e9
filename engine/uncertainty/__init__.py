"""Standard uncertainties of densities and of numbers derived from them, to first order in the errors.

errors.py      from a set's σ's, phase σ's, figures of merit and symmetry to its independent errors
pairs.py       the variance of a field as one more series, on the sums of two G of one measurement
functionals.py numbers that are linear in the coefficients (values, derivatives, integrals) and their covariance
sigma.py       σ of a field on its samples, costed before it is computed

Cruickshank & Rollett, Acta Cryst. 6 (1953) 705; Blow & Crick, Acta Cryst. 12 (1959) 794.
"""

from engine.uncertainty.errors import Errors, errors_of
from engine.uncertainty.functionals import Functional, PointDerivatives, covariance, numbers

__all__ = ["Errors", "Functional", "PointDerivatives", "covariance", "errors_of", "numbers"]
