"""On which line of a TOML text each key stands, for messages. The text is one that tomllib has accepted."""

import re

_KEY = re.compile(r'\s*("(?:[^"\\]|\\.)*"|\'[^\']*\'|[A-Za-z0-9_-]+)\s*(\.)?')


def _keys(text: str) -> tuple[list[str], int]:
    """Read a dotted key; return its parts and where it ends."""
    parts, place = [], 0
    while found := _KEY.match(text, place):
        parts.append(found[1].strip("\"'"))
        place = found.end()
        if not found[2]:
            break
    return parts, place


def lines_of(text: str) -> dict[str, int]:
    """Return path -> line (from 1) for every table and key that begins a line; arrays of tables carry their number."""
    found: dict[str, int] = {}
    counts: dict[str, int] = {}
    table: list[str] = []
    closing: str | None = None
    for number, line in enumerate(text.split("\n"), start=1):
        bare = line.strip()
        if closing is not None:
            if closing in bare:
                closing = None
            continue
        if not bare or bare.startswith("#"):
            continue
        if bare.startswith("[["):
            parts, _ = _keys(bare[2:])
            name = ".".join(parts)
            table = [*parts, str(counts.get(name, 0))]
            counts[name] = counts.get(name, 0) + 1
            found[".".join(table)] = number
        elif bare.startswith("[") and "=" not in bare.split("]")[0]:
            table, _ = _keys(bare[1:])
            found.setdefault(".".join(table), number)
        else:
            parts, end = _keys(bare)
            if parts and bare[end:].lstrip().startswith("="):
                found.setdefault(".".join([*table, *parts]), number)
                value = bare[end:].lstrip()[1:].lstrip()
                closing = next((q for q in ('"""', "'''") if value.startswith(q) and q not in value[3:]), None)
    return found


def line_of(found: dict[str, int], path: str) -> int:
    """Return the line of a path, of the first key in it, or of the nearest table around it; 1 where nothing of it stands."""
    while path:
        if path in found:
            return found[path]
        inside = [line for key, line in found.items() if key.startswith(path + ".")]
        if inside:
            return min(inside)
        path = path.rpartition(".")[0]
    return 1
