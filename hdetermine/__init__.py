"""hdetermine: the Planck constant from X-ray tube spectra, with its uncertainty.

>>> import hdetermine
>>> run = hdetermine.read_run("demo_runs/molybdenum_rocksalt")     # doctest: +SKIP
>>> result = hdetermine.determine(run, seed=1)                     # doctest: +SKIP
>>> result.h.value_J_s, result.h.expanded_uncertainty_J_s          # doctest: +SKIP
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from hdetermine.determination import determine
    from hdetermine.files.runsheet import read_run

__version__ = "0.1.0"
__all__ = ["__version__", "determine", "read_run"]


def __getattr__(name: str) -> object:
    """Import the heavy parts only when they are asked for."""
    if name == "read_run":
        from hdetermine.files.runsheet import read_run

        return read_run
    if name == "determine":
        from hdetermine.determination import determine

        return determine
    raise AttributeError(f"module 'hdetermine' has no attribute {name!r}")
