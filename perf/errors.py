"""The domain errors of `perf` and `geo`; the service turns them into problem+json.

ModelError
|- InputError       a value is outside what the model accepts
|- RecordError      an aircraft record is faulty or unknown
|- TerrainError     terrain is missing here, or a raster is refused
|- LimitError       the solve would be larger than the limits allow
`- Cancelled        the caller asked to stop
"""


class ModelError(Exception):
    """Root of the domain errors.

    Parameters
    ----------
    detail
        One sentence that says what is wrong and what to do. Never echoes input.
    field
        Dotted name of the faulty field, as in a request (`margins.bank_deg`), or None.
    allowed
        The allowed range or values in words, or None.
    """

    def __init__(self, detail: str, field: str | None = None, allowed: str | None = None) -> None:
        super().__init__(detail)
        self.detail = detail
        self.field = field
        self.allowed = allowed


class InputError(ModelError):
    """A value is outside what the model accepts."""


class RecordError(ModelError):
    """An aircraft record is faulty, or no record has that name."""


class TerrainError(ModelError):
    """There is no terrain here, or a raster file is refused."""


class LimitError(ModelError):
    """The solve would be larger than the limits allow."""


class Cancelled(ModelError):  # noqa: N818 - a request to stop is not an error of the model
    """The caller asked to stop."""

    def __init__(self) -> None:
        super().__init__("The solve was stopped at the caller's request.")
