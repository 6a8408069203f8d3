"""The certified search: bounds, tightening, frontier, best-first walk."""


def never() -> bool:
    """Say not to stop; the default wherever a search may be asked to."""
    return False
