"""Machine code without numba: compiled once, kept, loaded; never old, never damaged."""

import shutil
import struct
import subprocess
import sys
import threading
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from joblib import Parallel, delayed

from sweep.kernel import cache, code
from sweep.kernel.compiler import object_code
from tests.kernel import tiny
from tests.kernel.marching import marched

SHARES = 2928  # 1000 (1 + 1/2 + ... + 1/10) = 2928.97
PACKAGE = Path(cache.__file__).parents[1]


@pytest.fixture(scope="module")
def shares() -> bytes:
    return object_code(tiny.shares, "qd")


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """Return an empty cache folder of this test's own, in a process that has loaded nothing yet."""
    monkeypatch.setattr(cache, "folder", lambda: tmp_path)
    _forget(monkeypatch)
    return tmp_path


def _forget(monkeypatch) -> None:
    """Let this process start again with nothing loaded; what is loaded stays in memory."""
    monkeypatch.setattr(code, "_loaded", {})


class Compiler:
    """Hands out an object file and counts how often it was asked."""

    def __init__(self, data: bytes) -> None:
        self.data, self.calls = data, 0

    def __call__(self) -> bytes:
        self.calls += 1
        return self.data


def test_object_file_gives_what_the_function_gives(shares):
    loaded = code.Code.load(shares, "qd")
    for count, whole in ((0, 5.0), (10, 1000.0), (7, -123.456), (1000, 1e12)):
        assert tiny.shares.py_func(count, whole) == loaded(count, whole)


def test_compiled_once_then_loaded(folder, monkeypatch, shares):
    compiler = Compiler(shares)
    assert [SHARES] * 2 == [code.kept("shares.o", "qd", compiler)(10, 1000.0) for _ in range(2)]
    _forget(monkeypatch)
    assert SHARES == code.kept("shares.o", "qd", compiler)(10, 1000.0)
    assert 1 == compiler.calls
    assert ["shares.o"] == [path.name for path in folder.iterdir()]


def _flipped(data: bytes, place: int) -> bytes:
    return data[:place] + bytes([data[place] ^ 1]) + data[place + 1 :]


@pytest.mark.parametrize(
    "damage",
    [
        lambda data: _flipped(data, 0), lambda data: _flipped(data, 63), lambda data: _flipped(data, 64), lambda data: _flipped(data, len(data) // 2),
        lambda data: _flipped(data, len(data) - 1), lambda data: data[:-1], lambda data: data[:64], lambda data: data[:10], lambda data: b"",
        lambda data: data + b"\0", lambda data: data[64:],
    ],
    ids=["digest", "end of digest", "first byte", "middle", "last byte", "short", "no code", "torn digest", "empty", "long", "no digest"],
)  # fmt: skip
def test_damaged_object_file_is_made_again_and_never_loaded(folder, monkeypatch, shares, damage):
    compiler, handed = Compiler(shares), []
    code.kept("shares.o", "qd", compiler)
    kept = folder / "shares.o"
    whole = kept.read_bytes()
    kept.write_bytes(damage(whole))
    load = code.Code.load
    monkeypatch.setattr(code.Code, "load", lambda data, arguments: handed.append(data) or load(data, arguments))
    _forget(monkeypatch)
    assert cache.read("shares.o") is None
    assert SHARES == code.kept("shares.o", "qd", compiler)(10, 1000.0)
    assert 2 == compiler.calls
    assert [shares] == handed
    assert whole == kept.read_bytes()


def test_object_file_of_another_name_or_folder_is_not_read(folder, tmp_path_factory, monkeypatch, shares):
    cache.keep("shares.o", shares)
    shutil.copy(folder / "shares.o", folder / "others.o")
    assert cache.read("others.o") is None
    other = tmp_path_factory.mktemp("kernel-of-another-version")
    shutil.copy(folder / "shares.o", other / "shares.o")
    monkeypatch.setattr(cache, "folder", lambda: other)
    assert cache.read("shares.o") is None


def test_runs_where_nothing_can_be_kept(folder, monkeypatch, shares):
    """A disk that refuses (a file stands where the folder should), and no folder at all."""
    compiler = Compiler(shares)
    (folder / "file").write_bytes(b"")
    for place in (folder / "file", None):
        monkeypatch.setattr(cache, "folder", lambda place=place: place)
        _forget(monkeypatch)
        assert SHARES == code.kept("shares.o", "qd", compiler)(10, 1000.0)
    assert 2 == compiler.calls


def test_shared_place_that_others_can_write_is_not_used(tmp_path, monkeypatch):
    """Where the home cannot hold the cache, a folder in the temporary place does: this user's alone, for what lies in it is run."""
    (tmp_path / "no folder").write_text("")
    monkeypatch.setattr(cache.platformdirs, "user_cache_dir", lambda _: str(tmp_path / "no folder" / "below"))
    monkeypatch.setattr(cache.tempfile, "gettempdir", lambda: str(tmp_path))
    monkeypatch.delenv("SWEEP_CACHE_DIR", raising=False)
    found = cache.folder.__wrapped__()
    assert tmp_path == found.parents[1]
    assert 0o700 == found.parent.stat().st_mode & 0o777
    found.parent.chmod(0o777)
    assert cache.folder.__wrapped__() is None


def test_threads_that_ask_at_once_compile_once(folder, shares):
    compiler, ready = Compiler(shares), threading.Barrier(8)

    def ask(_: int) -> int:
        ready.wait()
        return code.kept("shares.o", "qd", compiler)(10, 1000.0)

    with ThreadPoolExecutor(8) as pool:
        assert [SHARES] * 8 == list(pool.map(ask, range(8)))
    assert 1 == compiler.calls


def test_processes_that_compile_at_once(tmp_path, monkeypatch):
    """All of them are right, and what is kept is whole."""
    monkeypatch.setenv("SWEEP_CACHE_DIR", str(tmp_path))
    processes = [subprocess.Popen([sys.executable, "-m", "tests.kernel.tiny"], stdout=subprocess.PIPE, text=True) for _ in range(2)]
    assert [str(SHARES)] * 2 == [process.communicate()[0] for process in processes]
    (folder,) = tmp_path.iterdir()
    assert ["shares.o"] == [path.name for path in folder.iterdir()]
    monkeypatch.setattr(cache, "folder", lambda: folder)
    data = cache.read("shares.o")
    assert data is not None
    assert SHARES == code.Code.load(data, "qd")(10, 1000.0)


def test_other_threads_run_while_the_kernel_does(shares):
    """A call leaves Python's lock: this thread counts on while the other is inside."""
    loaded, counted, done = code.Code.load(shares, "qd"), 0, threading.Event()

    def work() -> None:
        loaded(200_000_000, 1.0)
        done.set()

    thread = threading.Thread(target=work)
    thread.start()
    while not done.wait(1e-3):
        counted += 1
    thread.join()
    assert 5 < counted


def test_error_inside_compiled_code_is_noticed():
    loaded = code.Code.load(object_code(tiny.only_positive, "q"), "q")
    assert 3 == loaded(3)
    with pytest.raises(RuntimeError, match="ended with status"):
        loaded(0)


def test_code_that_needs_numba_when_it_runs_is_refused():
    with pytest.raises(RuntimeError, match="not there without numba"):
        object_code(tiny.allocates, "q")


def test_march_needs_nothing_but_the_c_library():
    """Read off the object file itself: what it lacks, and the one name that it shows."""
    code.march_code()
    data = cache.read(code.MARCH)
    assert data is not None
    if not data.startswith(b"\x7fELF"):
        pytest.skip("not an ELF file")
    lacking, shown = _symbols(data)
    assert lacking <= {"memset", "memcpy", "memmove", "sqrt"}
    assert {code.ENTRY} == shown


def _symbols(elf: bytes) -> tuple[set[str], set[str]]:
    """Return the names that a 64-bit little-endian ELF object lacks, and those that it shows (System V ABI, chapters 4: sections, symbols)."""
    start, size, count = struct.unpack_from("<Q", elf, 40)[0], *struct.unpack_from("<HH", elf, 58)
    sections = [struct.unpack_from("<IIQQQQIIQQ", elf, start + k * size) for k in range(count)]
    table = next(section for section in sections if section[1] == 2)
    names = sections[table[6]][4]
    lacking, shown = set(), set()
    for place in range(table[4] + 24, table[4] + table[5], 24):  # the first entry is empty
        name, info, _, section = struct.unpack_from("<IBBH", elf, place)
        if info >> 4:  # not local
            (shown if section else lacking).add(elf[names + name : elf.index(b"\0", names + name)].decode())
    return lacking, shown


def _copy(folder: Path) -> Path:
    return shutil.copytree(PACKAGE, folder / "sweep", ignore=shutil.ignore_patterns("__pycache__"))


def test_every_file_that_is_compiled_counts_for_the_folders_name(tmp_path):
    """A change of one character in any file gives another folder; files outside the kernel do not matter."""
    package = _copy(tmp_path)
    before = cache.digest(package)
    assert before == cache.digest()
    files = sorted((package / "kernel").glob("*.py"))
    assert 15 < len(files)
    for file in [*files, package / "base" / "status.py"]:
        text = file.read_text()
        file.write_text(text + "#")
        assert before != cache.digest(package), file
        file.write_text(text)
    (package / "plant" / "failure.py").write_text("")
    assert before == cache.digest(package)
    (package / "kernel" / "more.py").write_text("")
    assert before != cache.digest(package)


def test_march_is_compiled_from_no_other_file():
    asked = "import sys, sweep.kernel.march; print(*(name for name in sys.modules if name.split('.')[0] == 'sweep'))"
    names = set(subprocess.run([sys.executable, "-c", asked], capture_output=True, text=True, check=True).stdout.split())
    assert "sweep.kernel.jacobian" in names
    assert {"sweep", "sweep.base", "sweep.base.status"} == {name for name in names if not name.startswith("sweep.kernel")}


@pytest.mark.long
def test_march_just_compiled_loaded_and_compiled_again_are_the_same_bytes(tmp_path, monkeypatch):
    """Processes of their own with caches of their own; the second of them loads what the first compiled, without numba."""
    told = []
    for home, seed in (("first", "1"), ("first", "2"), ("second", "3")):
        monkeypatch.setenv("SWEEP_CACHE_DIR", str(tmp_path / home))
        monkeypatch.setenv("PYTHONHASHSEED", seed)
        told.append(subprocess.run([sys.executable, "-m", "tests.kernel.marching"], capture_output=True, text=True, check=True).stdout.split())
    assert ["numba", "no-numba", "numba"] == [words[0] for words in told]
    assert 1 == len({words[1] for words in told})
    assert 2 == len(list(tmp_path.rglob("march.o")))  # their bytes may differ: numba's names of inner functions follow the order of a set


@pytest.mark.long
def test_worker_process_loads_the_march_without_numba():
    code.march_code()
    told = Parallel(n_jobs=2, backend="loky")(delayed(marched)() for _ in range(4))
    assert {told[0]} == set(told)
    assert "no-numba" == told[0][0]
    assert marched()[1] == told[0][1]


def test_changed_kernel_does_not_see_the_old_code(tmp_path, monkeypatch):
    """In processes of their own: what is kept is there for the package as it was, and not after a change in a callee."""
    package = _copy(tmp_path)
    monkeypatch.setenv("SWEEP_CACHE_DIR", str(tmp_path / "cache"))

    def asked(task: str) -> str:
        task = f"import sweep.kernel.cache as cache, sweep.kernel as kernel; {task}"
        return subprocess.run([sys.executable, "-c", task], capture_output=True, text=True, check=True, cwd=tmp_path).stdout.strip()

    assert str(tmp_path) in asked("print(cache.__file__)")
    assert "True False" == asked("before = kernel.needs_compiling(); cache.keep('march.o', b'code'); print(before, kernel.needs_compiling())")
    callee = package / "kernel" / "functions.py"
    callee.write_text(callee.read_text() + "\n")
    assert "True" == asked("print(kernel.needs_compiling())")
