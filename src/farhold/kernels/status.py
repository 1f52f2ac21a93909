"""Integer codes by which kernels report what became of each lane; other floors turn them into words."""

__all__ = [
    "HIT_PRIMARY",
    "NOT_FINITE",
    "OK",
    "OUTSIDE_TABLES",
    "TOO_MANY_STEPS",
    "meaning",
]

OK = 0
NOT_FINITE = 1
HIT_PRIMARY = 2
TOO_MANY_STEPS = 3
OUTSIDE_TABLES = 4

_WORDS = (
    "done",
    "the state stopped being a finite number",
    "the path meets the Sun or the Earth",
    "the step size fell below what the span allows",
    "the path leaves where the tables of the arcs hold",
)


def meaning(code: int) -> str:
    """Return in words what status `code` says.

    Parameters
    ----------
    code : int, one of the codes of this file
    """
    return _WORDS[code]
