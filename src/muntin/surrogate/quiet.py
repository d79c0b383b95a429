"""Libraries of the reference engine, imported without the notes that they print to developers."""

from __future__ import annotations

import warnings
from typing import Any

_MISSING = (
    "the engine nuts needs PyMC, ArviZ and, to be fast, nutpie, which are not installed; "
    "pip install 'muntin[nuts]' brings them"
)


class NotInstalledError(ImportError):
    """A library of the reference engine is missing; says what to install."""

    def __init__(self) -> None:
        super().__init__(_MISSING)


def arviz() -> Any:
    """ArviZ, without its announcement of a later version. Raises NotInstalledError."""
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message=r"\s*ArviZ is undergoing a major refactor")
        try:
            import arviz
        except ModuleNotFoundError:
            raise NotInstalledError from None
    return arviz


def pymc() -> Any:
    """PyMC, without its note on BLAS, which nutpie does not use. Raises NotInstalledError."""
    arviz()
    with warnings.catch_warnings():
        warnings.filterwarnings("ignore", message="PyTensor could not link to a BLAS installation")
        try:
            import pymc
            from pytensor.configdefaults import config
        except ModuleNotFoundError:
            raise NotInstalledError from None
        # Looked up once and kept; the note comes with the first look.
        _ = config.blas__ldflags
    return pymc


def tensors() -> Any:
    """The symbolic arrays that PyMC stands on. Raises NotInstalledError."""
    pymc()
    import pytensor.tensor

    return pytensor.tensor


def nutpie() -> Any:
    """The sampler nutpie, or None where it is not installed."""
    try:
        import nutpie
    except ModuleNotFoundError:
        return None
    return nutpie
