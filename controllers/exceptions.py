"""Every way a caller can misuse the numerics; each message names the place, the value and the fix."""


class ControllerError(Exception):
    """Base of all errors raised by this package."""


class NetworkError(ControllerError):
    """Matrices, names and sizes of a network do not fit together."""


class EquilibriumError(ControllerError):
    """No operating point was found for the physics and targets given."""


class RowError(ControllerError):
    """A quantity or its price, target or limit makes no sense."""


class TerminalPriceError(ControllerError):
    """What lies beyond the horizon has no price: no stabilising solution, no resting point, or an unfit override."""


class NotLocalizableError(ControllerError):
    """Some section's response cannot be confined to its locality."""


class ForecastError(ControllerError):
    """A forecast was handed to a design that holds its disturbances."""


class NotFiniteError(ControllerError):
    """A number handed to a solve is not finite."""


class ObserverError(ControllerError):
    """No stable observer exists for a section, or the assembled observer is unstable."""


class ReferenceSolveError(ControllerError):
    """The whole-plant reference problem was not solved."""


class StoredDesignError(ControllerError):
    """Bytes that should hold a design do not: another format or version, damaged, or contradicting themselves."""
