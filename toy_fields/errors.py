"""What can be wrong with a request for toy fields; each error says what, where and what to do."""

from __future__ import annotations

from lespost.errors import DataError, RequestError


class GridError(RequestError):
    """A grid that the spectral operators cannot use: odd or too small numbers of points, lengths not positive."""


class UnresolvedStokesDepth(RequestError):
    """The e-folding depth of the Stokes drift is too thin for the vertical spacing."""


class UnstableTimeStep(RequestError):
    """A time step beyond the stability limit of the time stepping."""


class FieldsNotFinite(DataError):
    """The solver's fields are no longer finite numbers; nothing is written."""


class ToyRequestError(RequestError):
    """Any other request that cannot be met: an unknown case, contradictory settings, an output that exists."""
