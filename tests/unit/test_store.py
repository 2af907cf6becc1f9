"""The run folder: whole pieces or none, noticed changes, one run at a time, plain errors."""

from __future__ import annotations

import io
import json
import shutil
import subprocess
import sys
import threading
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from ruleout.case import read_case
from ruleout.cli.progress import JsonLines, PlainLines
from ruleout.errors import InputError, RuleoutError, lacks_room
from ruleout.pipeline import Settings, judge
from ruleout.progress import Silent
from ruleout.store import ASIDE, Store, locked, write_aside

ReadFiles = Callable[[Path], dict[str, bytes]]
ARRAYS = {
    "chain": np.linspace(0.0, 1.0, 30).reshape(5, 3, 2),
    "count": np.array(7),
    "words": np.array(["a", "bc"]),
    "none": np.zeros((4, 0)),
}
TABLES = ("variants.csv", "claims.csv", "checks.csv", "verdict.json")


def same(found: Any, expected: dict[str, np.ndarray[Any, Any]]) -> bool:
    return found is not None and all(
        np.array_equal(found[k], v) and found[k].dtype == v.dtype and found[k].shape == v.shape
        for k, v in expected.items()
    )


class Heard(Silent):
    def __init__(self) -> None:
        self.messages: list[str] = []

    def say(self, message: str) -> None:
        self.messages.append(message)


def test_a_piece_comes_back_as_it_was(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.put("v1/search", "abc", ARRAYS)
    found = store.get("v1/search", "abc")
    assert same(found, ARRAYS)
    assert set(found or {}) == set(ARRAYS)
    assert not store.outdated
    assert not store.damaged
    assert store.get("v2/search", "abc") is None


def test_a_piece_with_another_digest_is_out_of_date(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.put("v1/search", "abc", ARRAYS)
    assert store.get("v1/search", "abd") is None
    assert store.outdated == ["v1/search"]
    assert not store.damaged


def test_a_piece_cut_short_anywhere_is_damaged(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.put("v1/search", "abc", ARRAYS)
    path = store.path("v1/search")
    whole = path.read_bytes()
    for length in range(0, len(whole), 7):
        path.write_bytes(whole[:length])
        assert store.get("v1/search", "abc") is None, length
    assert len(store.damaged) == len(range(0, len(whole), 7))


def test_no_flipped_byte_changes_a_number_unnoticed(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.put("v1/search", "abc", ARRAYS)
    path = store.path("v1/search")
    whole = path.read_bytes()
    harmless = 0
    for at in range(len(whole)):
        path.write_bytes(whole[:at] + bytes([whole[at] ^ 0x55]) + whole[at + 1 :])
        found = store.get("v1/search", "abc")
        # A file date inside the archive may change without harm.
        assert found is None or same(found, ARRAYS), at
        harmless += found is not None
    assert harmless < len(whole) / 2


def test_a_piece_rewritten_with_other_numbers_is_damaged(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.put("v1/search", "abc", ARRAYS)
    path = store.path("v1/search")
    with np.load(path) as archive:
        arrays = dict(archive)
    arrays["chain"][0, 0, 0] += 1e-9
    np.savez(path, **arrays)
    assert store.get("v1/search", "abc") is None
    assert store.damaged == ["v1/search"]


def test_an_interrupted_write_leaves_what_was_there_and_nothing_else(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    write_aside(path, lambda aside: aside.write_text("old") and None)

    def stop(aside: Path) -> None:
        aside.write_text("half of the n")
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_aside(path, stop)
    assert path.read_text() == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["table.csv"]


def test_a_reader_never_sees_half_a_file(tmp_path: Path) -> None:
    path = tmp_path / "table.csv"
    texts = {letter: letter * 200_000 for letter in "ab"}
    write_aside(path, lambda aside: aside.write_text(texts["a"]) and None)
    done = threading.Event()

    def keep_writing() -> None:
        for i in range(60):
            text = texts["ab"[i % 2]]
            write_aside(path, lambda aside, text=text: aside.write_text(text) and None)
        done.set()

    writer = threading.Thread(target=keep_writing)
    writer.start()
    reads = 0
    while not done.is_set():
        assert path.read_text() in texts.values()
        reads += 1
    writer.join()
    assert reads > 0


def test_a_second_run_on_a_folder_is_refused_and_the_first_unharmed(tmp_path: Path) -> None:
    code = (
        "import sys\nfrom pathlib import Path\nfrom ruleout.store import locked\n"
        "from ruleout.errors import InputError\n"
        "try:\n    with locked(Path(sys.argv[1])):\n        print('mine')\n"
        "except InputError as error:\n    print(error); sys.exit(error.exit_status)\n"
    )

    def other() -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [sys.executable, "-c", code, str(tmp_path)], capture_output=True, text=True, check=False
        )

    with locked(tmp_path):
        under_way = tmp_path / f"{ASIDE}table-x.csv"
        under_way.write_text("half")
        refused = other()
        assert under_way.exists()
        with locked(tmp_path):
            pass
    assert refused.returncode == 2
    assert "another run is writing to this folder" in refused.stdout
    assert str(tmp_path) in refused.stdout
    assert other().stdout == "mine\n"
    # What a killed run left is cleared away by the next.
    assert not under_way.exists()


def test_another_thread_is_another_run(tmp_path: Path) -> None:
    seen: list[str] = []

    def other() -> None:
        try:
            with locked(tmp_path):
                seen.append("mine")
        except InputError as error:
            seen.append(str(error))

    with locked(tmp_path):
        thread = threading.Thread(target=other)
        thread.start()
        thread.join()
    assert len(seen) == 1
    assert "another run" in seen[0]


FULL = """
import resource, sys
from pathlib import Path
import numpy as np
from ruleout.errors import RuleoutError
from ruleout.fitting.convergence import save_fit
from ruleout.store import Store, write_aside
folder = Path(sys.argv[1])
store = Store(folder)
store.put("v1/search", "old", {"x": np.arange(10)})
fit = {"posterior": {"k": np.ones((4, 500))}, "log_likelihood": {"y": np.ones((4, 500, 9))},
       "posterior_predictive": {"y": np.ones((4, 500, 9))}, "observed_data": {"y": np.ones(9)}}
resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, 20_000))
writes = {
    "piece": lambda: store.put("v1/search", "new", {"x": np.zeros(100_000)}),
    "fit": lambda: write_aside(folder / "fits" / "v1.nc", lambda path: save_fit(path, fit)),
    "text": lambda: write_aside(folder / "t.csv", lambda p: p.write_text("x" * 100_000) and None),
}
for name, write in writes.items():
    try:
        write()
    except RuleoutError as error:
        print(name, error.exit_status, error)
assert np.array_equal(store.get("v1/search", "old")["x"], np.arange(10))
left = sorted(str(p.relative_to(folder)) for p in folder.rglob("*") if p.is_file())
assert left == ["stages/v1/search.npz"], left
"""


def test_without_room_the_error_is_plain_and_what_was_there_stays(tmp_path: Path) -> None:
    done = subprocess.run(
        [sys.executable, "-c", FULL, str(tmp_path)], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    lines = done.stdout.splitlines()
    assert [line.split()[:2] for line in lines] == [["piece", "1"], ["fit", "1"], ["text", "1"]]
    assert all("no room left to write" in line for line in lines)


def test_other_write_errors_are_not_taken_for_a_full_disk() -> None:
    assert not lacks_room(PermissionError(13, "Permission denied"))
    assert not lacks_room(ValueError("errno 28 of something"))
    with pytest.raises(IsADirectoryError):
        write_aside(Path("/tmp"), lambda aside: aside.write_text("x") and None)


together = pytest.mark.xdist_group("stored run")
SETTINGS = Settings(seed=3, effort="quick")


@pytest.fixture(scope="module")
def finished(tiny_case: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("stored")
    shutil.copytree(tiny_case, folder / "case")
    judge(read_case(folder / "case"), SETTINGS, out=folder / "run")
    return folder


@pytest.fixture
def again(finished: Path, tmp_path: Path) -> Path:
    shutil.copytree(finished, tmp_path / "again")
    return tmp_path / "again"


def rerun(folder: Path, settings: Settings = SETTINGS) -> tuple[list[str], set[str]]:
    """Judge again; return what was said and which pieces were written anew."""
    stages = folder / "run" / "stages"
    before = {path: path.stat().st_mtime_ns for path in stages.rglob("*.npz")}
    heard = Heard()
    judge(read_case(folder / "case"), settings, out=folder / "run", progress=heard)
    after = {path: path.stat().st_mtime_ns for path in stages.rglob("*.npz")}
    written = {p for p, at in after.items() if before.get(p) != at}
    return heard.messages, {str(p.relative_to(stages))[:-4] for p in written}


@together
def test_an_unchanged_run_computes_nothing_and_is_the_same(
    again: Path, finished_files: ReadFiles
) -> None:
    before = finished_files(again / "run")
    assert rerun(again) == ([], set())
    assert finished_files(again / "run") == before


@together
def test_lost_and_damaged_pieces_are_made_again_the_same(
    again: Path, finished_files: ReadFiles
) -> None:
    before = finished_files(again / "run")
    stages = again / "run" / "stages"
    (stages / "v1" / "search.npz").unlink()
    chain = stages / "v2" / "chain-1-001.npz"
    chain.write_bytes(chain.read_bytes()[:-100])
    observed = stages / "v2" / "observed.npz"
    content = bytearray(observed.read_bytes())
    content[len(content) // 2] ^= 0xFF
    observed.write_bytes(content)
    (again / "run" / "variants.csv").write_text("nonsense")
    said, written = rerun(again)
    assert written == {"v1/search", "v2/chain-1-001", "v2/observed"}
    assert said == ["Made again because damaged: 2 of v2."]
    assert finished_files(again / "run") == before


@together
def test_another_seed_is_noticed_and_told(again: Path) -> None:
    said, _ = rerun(again, Settings(seed=4, effort="quick"))
    assert len(said) == 1
    assert said[0].startswith("Made again because out of date")
    assert "v1" in said[0]
    assert "v2" in said[0]
    assert "inspection" in said[0]


@together
def test_another_error_rate_needs_no_new_chains(again: Path) -> None:
    _, written = rerun(again, Settings(seed=3, effort="quick", alpha=0.1))
    assert not {name for name in written if "chain" in name or "search" in name}
    document = json.loads((again / "run" / "verdict.json").read_text())
    assert document["alpha"] == 0.1


@together
def test_a_prior_of_one_variant_leaves_the_other_alone(again: Path) -> None:
    mechanism = again / "case" / "mechanism.toml"
    text = mechanism.read_text()
    old = '"inflow.rate" = { mean = 1, sd = 1 }'
    assert old in text
    mechanism.write_text(text.replace(old, '"inflow.rate" = { mean = 1, sd = 1.5 }'))
    said, written = rerun(again)
    fits = {name for name in written if "chain" in name or "search" in name}
    assert {name.split("/")[0] for name in fits} == {"v2"}
    assert len(said) == 1
    assert "of v2" in said[0]


@together
def test_new_data_redo_everything_and_equal_a_fresh_run(again: Path) -> None:
    data = again / "case" / "data.csv"
    lines = data.read_text().splitlines()
    first = lines[1].split(",")
    value = lines[0].split(",").index("value")
    first[value] = str(float(first[value]) + 0.01)
    data.write_text("\n".join([lines[0], ",".join(first), *lines[2:]]) + "\n")
    said, written = rerun(again)
    assert {"v1/search", "v2/search", "inspection"} <= written
    assert "out of date" in said[0]
    judge(read_case(again / "case"), SETTINGS, out=again / "fresh")
    for table in TABLES:
        assert (again / "run" / table).read_bytes() == (again / "fresh" / table).read_bytes()


def test_a_folder_that_cannot_be_made_is_bad_input(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot write there"), locked(tmp_path / "file" / "run"):
        pass
    assert issubclass(InputError, RuleoutError)


def test_what_is_made_again_is_told_as_a_line_and_as_an_event(tmp_path: Path) -> None:
    store = Store(tmp_path)
    store.outdated += ["v1/search", "v1/polish", "inspection"]
    plain, events = io.StringIO(), io.StringIO()
    store.tell_redone(PlainLines(plain))
    store.tell_redone(JsonLines(events))
    expected = (
        "Made again because out of date (an input, a setting or a version has changed): "
        "2 of v1, inspection."
    )
    assert plain.getvalue() == f"{expected}\n"
    event = json.loads(events.getvalue())
    assert (event["event"], event["message"]) == ("note", expected)
