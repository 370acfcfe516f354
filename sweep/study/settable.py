"""Which paths can be set although they are not written: the plain quantities of vessel and cooling."""

from sweep.study.reader import Reader


def dimension_of(reader: Reader, path: str) -> str | None:
    """Return the dimension of a path that may be set, None for one that may not."""
    from sweep.study.equipment import _COOLING, _VESSEL

    if path in reader.dimensions:
        return reader.dimensions[path]
    section, _, key = path.partition(".")
    return {"vessel": _VESSEL, "cooling": _COOLING}.get(section, {}).get(key)
