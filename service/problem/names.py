"""Names of boundary parts and regions, as people write them."""

from service.problem.reading import Place, read_text

LONGEST_NAME = 100

NAME_PATTERN = r"[^\u0000-\u001f\u007f]*[^\u0000-\u0020\u007f][^\u0000-\u001f\u007f]*"


def read_name(value: object, place: Place) -> str | None:
    """A name with something to see in it."""
    rule = "Must have a visible character and no control characters."
    return read_text(value, place, LONGEST_NAME, NAME_PATTERN, rule)
