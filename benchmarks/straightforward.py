"""The posterior's likelihood as one would write it first: one parameter vector, one row at a time.

scipy's `PchipInterpolator` for the spline, trapezoids on 1000 columns, a loop over rows. What does
not depend on the parameters (equivalent widths, cross-sections) is tabulated beforehand, as anybody
would do. Rows of a redshift bin are taken at its middle. The benchmark checks that both evaluations
agree before it compares their speeds.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from scipy.interpolate import PchipInterpolator

from fogline.absorbers.errors import density, selected
from fogline.atomic import (
    LYMAN_LIMIT,
    LYMAN_SERIES,
    log_nhi_at_tau,
    photoionization_cross_section,
)
from fogline.cosmology import C_KM_S
from fogline.datasets import EXPOSURE, INTENSITY, DataSet
from fogline.doppler import mean_equivalent_width
from fogline.likelihood import Likelihood
from fogline.line_blending import mean_blended_widths
from fogline.quantities.absorber_list import completeness
from fogline.quantities.hi_density import mass_per_moment
from fogline.quantities.lyman_series_opacity import LINES, absorbing_lines
from fogline.quantities.mean_free_path import length_unit
from fogline.response_file import Fit
from fogline.sightline_depth import WHOLE_SERIES

N_COLUMNS = 1000
N_PATH = 100


class Straightforward:
    """ln likelihood of one parameter vector, without any of the package's tricks.

    Parameters
    ----------
    fit : Fit
        Data sets and model.
    """

    def __init__(self, fit: Fit) -> None:
        self.fit = fit
        self.model = fit.analysis.model
        self.cosmology = fit.setting.cosmology
        self.grid = np.linspace(self.model.pivots[0], self.model.pivots[-1], N_COLUMNS)
        doppler = self.model.doppler
        alone = [mean_equivalent_width(self.grid, doppler, j) / j.wavelength for j in LYMAN_SERIES]
        self.widths = [*alone, *mean_blended_widths(self.grid, doppler)]
        self.likelihood = Likelihood.from_datasets(fit.response.datasets)

    def ln_likelihood(self, theta: np.ndarray) -> float:
        """Return ln p(data | θ) of one vector."""
        return float(self.likelihood.ln_total(self.predict(theta)[None])[0])

    def predict(self, theta: np.ndarray) -> np.ndarray:
        """Return the prediction of every row."""
        n_pivots = len(self.model.pivots)
        spline = PchipInterpolator(self.model.pivots, theta[:n_pivots])

        def f(log_nhi: np.ndarray, z: float) -> np.ndarray:
            gamma = np.interp(log_nhi, self.model.evolution.pivots, theta[n_pivots:])
            stretch = np.log10((1.0 + z) / (1.0 + self.model.reference_redshift))
            return 10.0 ** (spline(log_nhi) + gamma * stretch)

        rows = [
            getattr(self, f"_{data.quantity}")(f, data, row)
            for data in self.fit.response.datasets
            for row in range(data.n_rows)
        ]
        return np.array(rows)

    def _integral(self, f: Any, z: float, lo: float, hi: float, power: float = 0.0) -> float:
        log_nhi = np.linspace(lo, hi, N_COLUMNS)
        nhi = 10.0**log_nhi
        return float(np.trapezoid(f(log_nhi, z) * nhi ** (1.0 + power), log_nhi) * np.log(10.0))

    def _ratio(self, data: DataSet, z: float) -> float:
        ours = float(self.cosmology.dx_dz(z))
        if data.meta.get("per") == "dz":
            return ours
        return ours / float((data.cosmology or self.cosmology).dx_dz(z))

    def _limits(self, data: DataSet) -> tuple[float, float]:
        lo = data.meta.get("log_nhi_min")
        lo = float(log_nhi_at_tau(data.meta["tau_min"])) if lo is None else lo
        return lo, data.meta.get("log_nhi_max") or self.model.pivots[-1]

    def _lya_opacity(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        tau = self._line_depth(f, 0, data.z[row], data.meta["log_nhi_max"])
        return self._in_form(data, tau)

    def _lyman_series_opacity(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        main = LINES[data.meta["line"]]
        lines = absorbing_lines(main, data.meta["foreground"] == "included")
        observed = (1.0 + data.z[row]) * main.wavelength
        top = data.meta["log_nhi_max"]
        tau = sum(self._line_depth(f, j.n - 2, observed / j.wavelength - 1.0, top) for j in lines)
        return self._in_form(data, tau)

    def _in_form(self, data: DataSet, tau: float) -> float:
        forms = {"tau": tau, "mean_flux": np.exp(-tau), "decrement": 1.0 - np.exp(-tau)}
        return float(forms[data.meta["form"]])

    def _line_depth(self, f: Callable[..., Any], line: int, z: float, top: float) -> float:
        inside = self.grid <= top
        per_dex = f(self.grid, z) * 10.0**self.grid * self.widths[line] * np.log(10.0)
        summed = np.trapezoid(per_dex[inside], self.grid[inside])
        return float((1.0 + z) * self.cosmology.dx_dz(z) * summed)

    def _continuum_flux(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        assert data.wavelength_lo is not None
        assert data.wavelength_hi is not None
        z = data.z[row]
        middle = 0.5 * (data.wavelength_lo[row] + data.wavelength_hi[row])
        tau = self._sightline(f, data, z, middle)
        return float(np.exp(self._sightline(f, data, z, data.meta["reference_wavelength"]) - tau))

    def _sightline(self, f: Callable[..., Any], data: DataSet, z_em: float, rest: float) -> float:
        observed = (1.0 + z_em) * rest
        z_912 = observed / LYMAN_LIMIT - 1.0
        tau = self._depth(f, z_912, z_em) if z_912 < z_em else 0.0
        for line, z in enumerate(observed / WHOLE_SERIES - 1.0):
            if data.meta["lines"] == "included" and 0.0 <= z < z_em:
                tau += self._line_depth(f, line, z, self.model.pivots[-1])
        return tau

    def _absorber_list(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        assert data.role is not None
        log_nhi = np.linspace(max(self.grid[0], 19.0), self.grid[-1], N_COLUMNS)
        per_dex = np.log(10.0) * 10.0**log_nhi * completeness(data, log_nhi)
        if data.role[row] == INTENSITY:
            z = data.z_lo[row]
            kernel = density(data.log_nhi_lo[row], log_nhi, data.err_lo[row], data.err_hi[row])
            return float(self.cosmology.dx_dz(z)) * np.trapezoid(
                f(log_nhi, z) * kernel * per_dex, log_nhi
            )
        ends = data.log_nhi_lo[row], data.log_nhi_hi[row]
        if data.role[row] == EXPOSURE:
            ends = data.meta["log_nhi_min"], data.meta.get("log_nhi_max") or np.inf
        chance = selected(log_nhi, *ends, data.extras["errors_lo"], data.extras["errors_hi"])
        return sum(
            weight
            * float(self.cosmology.dx_dz(z))
            * np.trapezoid(f(log_nhi, z) * chance * per_dex, log_nhi)
            for z, weight in zip(data.extras["path_z"], data.extras["path_weight"], strict=True)
        )

    def _lls_incidence(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        z = data.z[row]
        incidence = self._integral(f, z, *self._limits(data)) * self._ratio(data, z)
        return incidence * (data.search_path[row] if data.counts else 1.0)

    def _column_distribution(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        z, lo, hi = data.z[row], data.log_nhi_lo[row], data.log_nhi_hi[row]
        number = self._integral(f, z, lo, hi) * self._ratio(data, z)
        if data.counts:
            return number * data.search_path[row]
        return float(np.log10(number / (10.0**hi - 10.0**lo)))

    def _hi_density(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        z, cosmology = data.z[row], data.cosmology
        moment = self._integral(f, z, *self._limits(data), power=1.0) * self._ratio(data, z)
        omega = moment * mass_per_moment(cosmology) / cosmology.critical_density
        return omega * data.meta.get("helium_factor", 1.0)

    def _mean_free_path(self, f: Callable[..., Any], data: DataSet, row: int) -> float:
        z, cosmology = data.z[row], data.cosmology
        unit = length_unit(data.unit, cosmology)
        if data.meta["definition"] == "local":
            opacity = self._absorbed(f, z, 1.0) * float(self.cosmology.dx_dz(z))
            return C_KM_S / float(cosmology.hubble(z)) / (1.0 + z) / opacity * unit
        return self._unit_depth(f, z, cosmology, data.meta["frame"]) * unit

    def _absorbed(self, f: Callable[..., Any], z: float, ratio: float) -> float:
        nhi = 10.0**self.grid
        depth = nhi * float(photoionization_cross_section(ratio))
        per_dex = f(self.grid, z) * nhi * (1.0 - np.exp(-depth)) * np.log(10.0)
        return float(np.trapezoid(per_dex, self.grid))

    def _unit_depth(self, f: Callable[..., Any], z_em: float, cosmology: Any, frame: str) -> float:
        z_near = np.linspace(z_em, 0.4 * z_em, 20)
        depths = [self._depth(f, z, z_em) for z in z_near]
        z_912 = float(np.interp(1.0, depths, z_near))
        length = cosmology.comoving_length if frame == "comoving" else cosmology.proper_length
        return float(length(z_912, z_em))

    def _depth(self, f: Callable[..., Any], z_near: float, z_em: float) -> float:
        path = np.linspace(z_near, z_em, N_PATH // 4)
        along = [
            self._absorbed(f, z, max((1.0 + z) / (1.0 + z_near), 1.0))
            * float(self.cosmology.dx_dz(z))
            for z in path
        ]
        return float(np.trapezoid(along, path))
