"""What a results folder says of itself: read, checked against its own digest, and compared with what is asked for now."""

import json
import platform
import tomllib
from collections.abc import Iterator, Mapping
from importlib.metadata import version
from pathlib import Path
from typing import Any

from sweep import __version__
from sweep.base.errors import ForeignResultsError, SurroundingsError, one_line
from sweep.base.records import digest
from sweep.plan import Planned
from sweep.study.model import Study

SCHEMA = 1
AGAIN = "--fresh moves the folder's results aside and starts again"
_PACKAGES = ("numpy", "scipy", "pandas", "numba", "llvmlite", "pyarrow", "matplotlib")
_MOST, _LONGEST = 8, 60  # changes that are named; signs of a value in a message


def versions() -> dict[str, str]:
    """Return what the numbers depend on beside the study."""
    return {"sweep": __version__, "python": platform.python_version(), "machine": platform.machine(), **{p: version(p) for p in _PACKAGES}}


def new_manifest(study: Study, plan: Planned) -> dict[str, Any]:
    """Return the manifest of a run that begins."""
    return {
        "schema": SCHEMA, "study": study.text, "study_name": study.name, "study_digest": study.digest, "versions": versions(),
        "seed": study.seed, "plan": _plan_record(study, plan), "files": {}, "analyses": {}, "state": "running",
    }  # fmt: skip


def _plan_record(study: Study, plan: Planned) -> dict[str, Any]:
    record: dict[str, Any] = {"kind": plan.kind, "size": plan.size}
    if plan.kind == "list" and study.plan is not None and study.plan.file is not None:
        record["list_digest"] = digest(study.plan.file.read_bytes())
    return record


def sealed(manifest: Mapping[str, Any]) -> dict[str, Any]:
    """Return a manifest with the digest of all else that it holds."""
    rest = {key: value for key, value in manifest.items() if key != "digest"}
    return {**rest, "digest": digest(rest)}


def read_manifest(folder: Path) -> dict[str, Any] | None:
    """Return the manifest of a results folder, None where there is none; SurroundingsError where it cannot be used."""
    path = folder / "manifest.json"
    try:
        manifest = json.loads(path.read_text(encoding="utf-8"))
    except FileNotFoundError:
        return None
    except OSError as error:
        raise SurroundingsError(f"{path} cannot be read: {error.strerror or error}") from None
    except (ValueError, RecursionError) as error:
        raise SurroundingsError(f"{path} is damaged: {error}; {AGAIN}") from None
    schema = manifest.get("schema") if isinstance(manifest, dict) else None
    if isinstance(schema, int) and schema > SCHEMA:
        newer = f"has schema {schema}, of a newer version of the program; this one reads {SCHEMA}"
        raise SurroundingsError(f"{path} {newer}. Use the newer one, or begin anew: {AGAIN}")
    if schema != SCHEMA or not all(isinstance(manifest.get(key), dict) for key in ("files", "analyses")):
        raise SurroundingsError(f"{path} is damaged: it lists no files; {AGAIN}")
    if "digest" in manifest and manifest != sealed(manifest):
        raise SurroundingsError(f"{path} is damaged: it does not hold what was written; {AGAIN}")
    return manifest


def refuse_foreign(folder: Path, before: Mapping[str, Any], now: Mapping[str, Any]) -> None:
    """ForeignResultsError, naming each change, where a folder's results are of another study, plan or program."""
    if before.get("study_digest") != now["study_digest"]:
        raise _foreign(folder, "another study", _document(before.get("study")), _document(now["study"]))
    for key, what in (("plan", "another plan"), ("versions", "other versions of the program")):
        if before.get(key) != now[key]:
            raise _foreign(folder, what, before.get(key), now[key])


def _foreign(folder: Path, what: str, before: Any, now: Any) -> ForeignResultsError:
    changes = list(_changes("", before, now))
    more = [f"and {len(changes) - _MOST} more"] if len(changes) > _MOST else []
    listed = "".join(f"\n  {change}" for change in [*changes[:_MOST], *more])
    return ForeignResultsError(f"{folder} holds the results of {what}:{listed}\n{AGAIN}; or choose another --out")


def _document(text: object) -> dict[str, Any]:
    """Return a study's text as tables; empty where it is none."""
    try:
        return tomllib.loads(text.replace("\r\n", "\n")) if isinstance(text, str) else {}
    except (ValueError, RecursionError):
        return {}


def _changes(path: str, before: Any, now: Any) -> Iterator[str]:
    """Yield "key: value then, value now" for every key that differs, in the order of what is asked for now."""
    if isinstance(before, list) and isinstance(now, list) and all(isinstance(x, dict) for x in [*before, *now]):
        before, now = dict(enumerate(before)), dict(enumerate(now))
    if not (isinstance(before, dict) and isinstance(now, dict)):
        yield f"{path or 'all of it'}: {_short(before)} then, {_short(now)} now"
        return
    for key in dict.fromkeys([*now, *before]):
        if key not in now or key not in before or before[key] != now[key]:
            yield from _changes(one_line(f"{path}.{key}" if path else str(key)), before.get(key), now.get(key))


def _short(value: Any) -> str:
    """Return a value in words: a digest by its first twelve signs, nothing for what is not there."""
    if value is None:
        return "nothing"
    if isinstance(value, str) and len(value) == 64:
        return value[:12]
    text = json.dumps(value, ensure_ascii=False, default=str) if isinstance(value, (dict, list)) else str(value)
    text = one_line(text)
    return text if len(text) <= _LONGEST else f"{text[: _LONGEST - 3]}..."
