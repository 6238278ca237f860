"""An electrode's kinetics from its polarization curve: a closure inside SciPy's least_squares.

Overpotentials were measured at twelve current densities. The model is Butler-Volmer's equation, solved for the
overpotential (the closure `overpotential`), plus the drop over an uncompensated resistance:

    eta(i0, i, aa, 1 - aa, T) + i*r = measured

Three numbers are sought: the exchange current density i0 (by its logarithm, for it spans decades), the transfer
coefficient aa and the resistance r. The closure's jacobian makes that of the fit exact: no differences, no step
sizes. The measurements are invented: made with i0 = 0.5 A/m^2, aa = 0.42, r = 2e-5 ohm m^2 and a reading error of some
0.2 mV. Cells carry hazards of electricity, of gases and of chemicals; their design follows local codes and licensed
practice.
"""

import numpy as np
import rootwright
from scipy.optimize import least_squares

T = 298.15                                                          # K
CURRENT = np.array([0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0, 200.0, 500.0, 1000.0])        # A/m^2
MEASURED = 1e-3*np.array([10.7, 26.6, 51.6, 86.8, 141.2, 183.6, 225.8, 282.9, 326.0, 370.6, 432.8, 484.8])      # V

electrode = rootwright.load("overpotential")


def residuals(x):
    """Computed minus measured overpotential, in V."""
    i0, aa, r = np.exp(x[0]), x[1], x[2]
    return electrode(i0=i0, i=CURRENT, aa=aa, ac=1 - aa, T=T).eta + CURRENT*r - MEASURED


def jacobian(x):
    """Derivatives of the residuals by log(i0), aa and r: the closure's, by the chain rule."""
    i0, aa, _ = np.exp(x[0]), x[1], x[2]
    by_i0, _, by_aa, by_ac, _ = electrode.jacobian(i0=i0, i=CURRENT, aa=aa, ac=1 - aa, T=T)[:, 0].T
    return np.column_stack([i0*by_i0, by_aa - by_ac, CURRENT])


def fit():
    """The least-squares fit and its standard errors."""
    found = least_squares(residuals, x0=[np.log(5.0), 0.5, 0.0], jac=jacobian, x_scale=[1.0, 0.1, 1e-5],
                          xtol=1e-12, ftol=1e-12, gtol=1e-12)
    variance = 2*found.cost/(len(CURRENT) - 3)
    return found, np.sqrt(variance*np.diag(np.linalg.inv(found.jac.T @ found.jac)))


if __name__ == "__main__":
    found, errors = fit()
    i0, aa, r = np.exp(found.x[0]), found.x[1], found.x[2]
    print(f"i0 = {i0:.3f} +- {i0*errors[0]:.3f} A/m^2")
    print(f"aa = {aa:.4f} +- {errors[1]:.4f}")
    print(f"r  = {1e6*r:.2f} +- {1e6*errors[2]:.2f} micro-ohm m^2")
    print(f"{1e3*np.sqrt(np.mean(found.fun**2)):.2f} mV root mean square, {found.nfev} evaluations")
