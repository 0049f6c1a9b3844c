"""Lists of absorbers drawn from known distributions: what the process likelihood makes of them."""

import dataclasses

import numpy as np
import pytest
from astropy.table import Table
from scipy.optimize import minimize_scalar

from fogline.constraint_files import read_constraint_file
from fogline.cosmology import Cosmology
from fogline.datasets import EXPOSURE
from fogline.distribution import ColumnDistribution
from fogline.likelihood import Likelihood
from fogline.quantities import Setting
from fogline.response import build_response

FIXED = {"dist": "fixed", "b": 26.0}
COSMOLOGY = Cosmology(70.0, 0.3)


def written(folder, absorbers, path, **meta):
    """Write a list and its path, and read them back."""
    path.meta = {"kind": "sightlines", "source": "drawn"}
    path.write(folder / "path.ecsv", format="ascii.ecsv", overwrite=True)
    absorbers.meta = {
        "quantity": "absorber_list",
        "source": "drawn",
        "survey_path": "path.ecsv",
        **meta,
    }
    absorbers.write(folder / "drawn.ecsv", format="ascii.ecsv", overwrite=True)
    return read_constraint_file(folder / "drawn.ecsv")


def power_law(pivots, slope, anchor):
    """Return setting and parameters of f = 10^anchor (N / N_first)^-slope, no evolution."""
    distribution = ColumnDistribution(2.5, pivots, (pivots[0],))
    log_f = anchor - slope * (np.array(pivots) - pivots[0])
    return Setting(distribution, COSMOLOGY, FIXED), np.array([*log_f, 0.0])


def fitted_slope(data, pivots):
    """Return the slope of a power law at the maximum of the likelihood, its scale free."""
    likelihood = Likelihood.from_datasets([data])
    setting, _ = power_law(pivots, 2.0, -22.0)
    response = build_response([data], setting)
    exposure = np.flatnonzero(data.role == EXPOSURE)[0]
    n = data.n_listed

    def cost(slope):
        predicted = response.predict(power_law(pivots, slope, -22.0)[1][None])
        # With a free factor the expected number is the one that was found.
        factor = n / predicted[0, exposure]
        return -likelihood.ln_total(predicted * factor)[0]

    return minimize_scalar(cost, bounds=(1.1, 4.0), method="bounded").x


def test_slope_of_a_power_law_has_a_closed_form(tmp_path):
    """β = 1 + n / Σ ln(N_i / N_min): Crawford, Jauncey & Murdoch 1970, ApJ 162, 405 (memory)."""
    rng = np.random.default_rng(31)
    n = 2000
    log_nhi = 20.3 + rng.exponential(1.0 / np.log(10.0) / 0.9, n)  # slope 1.9
    log_nhi = np.minimum(log_nhi, 25.4)
    absorbers = Table({"z": rng.uniform(2.0, 3.0, n), "log_nhi": log_nhi, "err": np.full(n, 0.02)})
    path = Table({"z_start": [2.0], "z_end": [3.0]})
    data = written(tmp_path, absorbers, path, log_nhi_min=20.3)
    closed = 1.0 + n / (np.log(10.0) * (log_nhi - 20.3)).sum()
    found = fitted_slope(data, (20.0, 21.5, 23.5, 25.9))
    # Of the closed form's own error, 0.9/√2000 = 0.02, a small part.
    assert found == pytest.approx(closed, abs=0.006)


def test_marginalised_errors_do_not_flatten_the_slope(tmp_path):
    """Errors of 0.25 dex scatter weak absorbers into the list; the fit must take them out."""
    rng = np.random.default_rng(32)
    true = 19.0 + rng.exponential(1.0 / np.log(10.0) / 1.4, 120_000)  # slope 2.4
    measured = true + 0.25 * rng.standard_normal(len(true))
    kept = (measured > 20.3) & (measured < 23.0)
    n = kept.sum()
    path = Table({"z_start": [2.0], "z_end": [3.0]})
    meta = {"log_nhi_min": 20.3, "log_nhi_max": 23.0}
    z = rng.uniform(2.0, 3.0, n)
    found = [
        fitted_slope(
            written(
                tmp_path,
                Table({"z": z, "log_nhi": measured[kept], "err": np.full(n, error)}),
                path,
                **meta,
            ),
            (18.6, 20.0, 21.5, 24.5),
        )
        for error in (0.25, 0.02)
    ]
    error = 1.4 / np.sqrt(n)
    assert abs(found[0] - 2.4) < 4.0 * error
    # A power law keeps its slope under convolution; what errors add is to the number.
    assert abs(found[1] - 2.4) < 0.2


def test_number_is_biased_without_errors_and_right_with_them(tmp_path):
    rng = np.random.default_rng(33)
    pivots, slope, anchor = (19.0, 20.0, 21.5, 24.5), 2.4, -18.5
    setting, theta = power_law(pivots, slope, anchor)
    per_x = 10.0 ** (anchor + pivots[0]) / (slope - 1.0)
    z = np.linspace(2.0, 3.0, 401)
    # What lies below the first pivot is more than five errors away.
    n_true = rng.poisson(per_x * np.trapezoid(COSMOLOGY.dx_dz(z), z) * 3000)
    true = pivots[0] + rng.exponential(1.0 / np.log(10.0) / 1.4, n_true)
    measured = true + 0.25 * rng.standard_normal(n_true)
    kept = measured > 20.3
    n = int(kept.sum())
    path = Table({"z_start": np.full(3000, 2.0), "z_end": np.full(3000, 3.0)})
    for error, good in ((0.25, True), (0.02, False)):
        absorbers = Table({
            "z": rng.uniform(2.0, 3.0, n), "log_nhi": measured[kept], "err": np.full(n, error),
        })  # fmt: skip
        data = written(tmp_path, absorbers, path, log_nhi_min=20.3)
        predicted = build_response([data], setting).predict(theta)
        expected = predicted[np.flatnonzero(data.role == EXPOSURE)[0]]
        assert bool(abs(n - expected) < 4.0 * np.sqrt(n)) is good


@pytest.mark.parametrize("cut", [True, False])
def test_sightlines_that_end_at_their_first_thick_absorber(tmp_path, cut):
    """Survival: whole sightlines expect more than is found, those cut at the absorber do not."""
    rng = np.random.default_rng(34)
    pivots = (17.0, 18.0, 19.5, 21.0)
    setting, theta = power_law(pivots, 1.5, -17.4)
    least = 17.5
    fine = np.linspace(least, 21.0, 4001)
    f = 10.0 ** setting.distribution.log_f(theta, fine, 2.5)
    per_x = np.trapezoid(f * np.log(10.0) * 10.0**fine, fine)
    n_sightlines = 1500
    rows = []
    z_end = rng.uniform(3.0, 4.0, n_sightlines)
    z_start = z_end - 0.8
    for i in range(n_sightlines):
        n_here = rng.poisson(per_x * 0.8 * float(COSMOLOGY.dx_dz(z_end[i] - 0.4)))
        if n_here:  # only the first from above is ever seen
            highest = rng.uniform(z_start[i], z_end[i], n_here).max()
            rows.append((highest, 17.9, 0.05, i))
    absorbers = Table(rows=rows, names=("z", "log_nhi", "err", "sightline"))
    path = Table({"z_start": z_start, "z_end": z_end, "sightline": np.arange(n_sightlines)})
    meta = {"log_nhi_min": least} | ({"ends_at_tau": 1.0} if cut else {})
    data = written(tmp_path, absorbers, path, **meta)
    expected = build_response([data], setting).predict(theta)[
        np.flatnonzero(data.role == EXPOSURE)[0]
    ]
    n = data.n_listed
    assert 500 < n < 1200
    # Selection at 17.5 with an error of 0.05 adds 0.4% to the expected number.
    assert bool(abs(n - expected) < 4.0 * np.sqrt(n)) is cut


def test_a_million_rows_make_no_more_cells(tmp_path):
    rng = np.random.default_rng(35)
    sizes = []
    for n in (3000, 300_000):
        absorbers = Table({
            "z": np.round(rng.uniform(2.0, 3.5, n), 5),
            "log_nhi": np.round(20.3 + rng.exponential(0.4, n).clip(0.0, 1.6), 3),
            "err": rng.choice([0.1, 0.15, 0.2], n),
        })  # fmt: skip
        path = Table({"z_start": [2.0], "z_end": [3.5]})
        data = written(tmp_path, absorbers, path, log_nhi_min=20.3)
        assert data.n_listed == n
        sizes.append(data.n_rows)
    assert sizes[1] < 1.2 * sizes[0]


def test_expected_damped_absorbers_of_a_published_fit(tmp_path):
    """ℓ(X) = 0.076 of the Γ-function of Noterdaeme et al. 2009 (memory; ℓ(X) derived)."""
    distribution = ColumnDistribution(2.5, (19.0, 19.7, 20.3), (20.3,), form="gamma", top=23.0)
    log_k, log_ng, alpha = -22.75, 21.26, -1.27
    x = np.array([19.0, 19.7, 20.3]) - log_ng
    log_f = log_k + alpha * x - 10.0**x / np.log(10.0)
    theta = np.array([*log_f, 0.0, -alpha, log_ng])
    absorbers = Table({"z": [2.5], "log_nhi": [20.8], "err": [0.02]})
    path = Table({"z_start": [2.2], "z_end": [3.2]})
    data = written(tmp_path, absorbers, path, log_nhi_min=20.3)
    setting = Setting(distribution, COSMOLOGY, FIXED)
    expected = build_response([data], setting).predict(theta)
    z = np.linspace(2.2, 3.2, 201)
    x_path = np.trapezoid(COSMOLOGY.dx_dz(z), z)
    number = expected[np.flatnonzero(data.role == EXPOSURE)[0]]
    assert number / x_path == pytest.approx(0.076, abs=0.0005 + 0.0005)


BAD = [
    ({"survey_path": "nowhere.ecsv"}, {}, "survey_path names 'nowhere.ecsv', but there is no"),
    ({"survey_path": "drawn.ecsv"}, {}, "must be sightlines or sensitivity"),
    ({"ends_at_tau": 2.0}, {}, "ends_at_tau needs a column 'sightline'"),
    ({"student_dof": 4}, {}, "student_dof has no effect on single absorbers"),
    ({"log_nhi_min": 21.0}, {}, "log_nhi is 20.8, must be within the range that the list holds"),
    ({}, {"z": [3.4]}, "z is 3.4, must be on the survey path, 2.2 to 3.2"),
]


@pytest.mark.parametrize(("meta", "changes", "words"), BAD)
def test_faults_of_a_list(tmp_path, meta, changes, words):
    from fogline.faults import InputError

    absorbers = Table({"z": [2.5], "log_nhi": [20.8], "err": [0.1]} | changes)
    path = Table({"z_start": [2.2], "z_end": [3.2]})
    with pytest.raises(InputError, match=r"drawn\.ecsv:\d+: ") as caught:
        written(tmp_path, absorbers, path, **({"log_nhi_min": 20.3} | meta))
    assert words in str(caught.value)


def test_tabulated_path_gives_the_same_as_its_sightlines(tmp_path):
    from fogline.absorbers.path import sensitivity_table

    rng = np.random.default_rng(36)
    start = np.round(rng.uniform(2.2, 2.8, 30), 3)
    end = start + 0.4
    absorbers = Table({"z": [2.5], "log_nhi": [20.8], "err": [0.1]})
    data = written(tmp_path, absorbers, Table({"z_start": start, "z_end": end}), log_nhi_min=20.3)
    sensitivity_table(start, end).write(tmp_path / "path.ecsv", format="ascii.ecsv", overwrite=True)
    other = read_constraint_file(tmp_path / "drawn.ecsv")
    setting, theta = power_law((19.0, 20.3, 21.5, 22.5), 1.8, -20.0)
    first, second = (build_response([d], setting).predict(theta) for d in (data, other))
    assert second[-1] == pytest.approx(first[-1], rel=1e-4)
    assert dataclasses.replace(data).n_listed == 1
