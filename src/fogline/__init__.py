"""fogline: one distribution of neutral hydrogen for every quasar absorption measurement.

The façade: what users of the package need, loaded on first use, so that ``import fogline`` is free.

>>> study = fogline.load_config("config/config.yaml")
>>> analysis = study.analyses["joint"]
>>> fit = fogline.build_fit(analysis, fogline.read_inputs(analysis))
>>> fit.response.predict(theta)  # every row of every file, in its own convention
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_HOME = {
    "Cosmology": "fogline.cosmology",
    "ColumnDistribution": "fogline.distribution",
    "DataSet": "fogline.datasets",
    "Draws": "fogline.derived",
    "Fit": "fogline.response_file",
    "InputError": "fogline.faults",
    "Likelihood": "fogline.likelihood",
    "Posterior": "fogline.posterior",
    "Prior": "fogline.priors",
    "QUANTITIES": "fogline.quantities",
    "Response": "fogline.response",
    "Setting": "fogline.quantities",
    "assess": "fogline.convergence",
    "build_fit": "fogline.response_file",
    "build_response": "fogline.response",
    "check_predictive": "fogline.trust.predictive",
    "load_config": "fogline.config",
    "load_fit": "fogline.response_file",
    "read_constraint_file": "fogline.constraint_files",
    "read_draws": "fogline.posterior_file",
    "read_inputs": "fogline.inputs",
    "run_ensemble": "fogline.ensemble",
    "save_fit": "fogline.response_file",
    "write_derived": "fogline.derived",
}

__all__ = sorted(_HOME)


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'fogline' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return list(__all__)
