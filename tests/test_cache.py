"""The stage cache: keys, integrity, eviction, sharing, and SIGKILL at any moment."""

from __future__ import annotations

import dataclasses
import datetime
import enum
import os
import pathlib
import signal
import subprocess
import sys
import textwrap
import time

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sms_resource.cache import CacheKeyError, StageCache, cache_key, limit_fault, user_cache_folder

KEYS = [cache_key(n) for n in range(20)]


@dataclasses.dataclass(frozen=True)
class Held:
    name: str
    values: np.ndarray


class Colour(enum.Enum):
    RED = 1


def test_a_value_comes_back_as_it_was(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path / "cache")
    frame = pd.DataFrame({"a": [1.5, np.nan], "b": ["x", None], "c": pd.Categorical(["u", "v"])})
    value = {"frame": frame, "held": Held("n", np.arange(6.0).reshape(2, 3)), "plain": (1, None, "t")}
    assert cache.get(KEYS[0]) is None
    assert cache.put(KEYS[0], value)
    back = cache.get(KEYS[0])
    pd.testing.assert_frame_equal(back["frame"], frame)
    np.testing.assert_array_equal(back["held"].values, value["held"].values)
    assert back["plain"] == value["plain"]
    assert back["held"].values.flags.writeable  # a caller may go on working with it
    assert KEYS[0] in cache and KEYS[1] not in cache


def test_none_is_a_value_and_get_or_compute_computes_once(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path)
    calls = []
    for _ in range(3):
        value, found = cache.get_or_compute(KEYS[0], lambda: calls.append(1))
    assert (value, found, len(calls)) == (None, True, 1)


def test_keys_know_order_type_and_content() -> None:
    assert cache_key({"a": 1, "b": [1, 2]}) == cache_key({"b": (1, 2), "a": 1})
    distinct = [
        1, 1.0, True, "1", None, "", [], {}, [1], [[1]], {"a": 1}, {"a": 1.0}, {1: "a"}, {"1": "a"}, float("nan"),
        float("inf"), -0.0, 0.0, b"1", pathlib.Path("1"), {1}, datetime.date(2024, 1, 1), "2024-01-01", Colour.RED,
        np.array([1]), np.array([1.0]), np.array([[1]]), np.array(["1"], dtype=object), Held("n", np.zeros(2)),
        Held("n", np.ones(2)), {"float": "nan"}, ["float", "nan"],
    ]  # fmt: skip
    keys = [cache_key(part) for part in distinct]
    assert len(set(keys)) == len(keys)
    assert cache_key(np.float64(2.5)) == cache_key(2.5) and cache_key(np.int32(2)) == cache_key(2)
    assert cache_key(float("nan")) == cache_key(np.nan)
    # known answer: SHA-256 of the three bytes "abc" in quotes, by coreutils' sha256sum
    assert cache_key("abc") == "6cc43f858fbb763301637b5af970e2a46b46f461f27e5a0f41e009c59b827b25"
    with pytest.raises(CacheKeyError, match="object"):
        cache_key({"a": object()})


@settings(max_examples=50, deadline=None)
@given(
    st.recursive(
        st.none() | st.booleans() | st.integers() | st.floats() | st.text(),
        lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
        max_leaves=12,
    )
)
def test_any_plain_value_has_a_stable_key(part: object) -> None:
    shuffled = dict(reversed(part.items())) if isinstance(part, dict) else part
    assert cache_key(part) == cache_key(shuffled)


@pytest.mark.parametrize("damage", ["flip", "cut", "empty", "garbage", "swap"])
def test_a_broken_entry_is_a_miss_and_is_removed(tmp_path: pathlib.Path, damage: str) -> None:
    cache = StageCache(tmp_path)
    cache.put(KEYS[0], np.arange(1000))
    path = cache.path(KEYS[0])
    body = bytearray(path.read_bytes())
    if damage == "flip":
        body[len(body) // 2] ^= 1
    elif damage == "cut":
        body = body[:-10]
    elif damage == "empty":
        body = bytearray()
    elif damage == "garbage":
        body = bytearray(os.urandom(200))
    else:
        body = body[100:]
    path.write_bytes(bytes(body))
    assert cache.get(KEYS[0], "gone") == "gone"
    assert not path.exists()
    assert cache.put(KEYS[0], 5) and cache.get(KEYS[0]) == 5


def test_an_entry_of_a_class_that_is_gone_is_a_miss(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path)
    module = type(sys)("module_that_goes")
    exec("class Gone:\n    pass", module.__dict__)
    module.Gone.__module__ = "module_that_goes"
    sys.modules["module_that_goes"] = module
    try:
        assert cache.put(KEYS[0], module.Gone())
    finally:
        del sys.modules["module_that_goes"]
    assert cache.get(KEYS[0]) is None and KEYS[0] not in cache


def test_least_recently_used_goes_first(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path, limit_bytes=3500)
    for age, key in enumerate(KEYS[:3]):
        cache.put(key, bytes(1000))
        os.utime(cache.path(key), (1000 + age, 1000 + age))
    assert cache.get(KEYS[0]) is not None  # now the youngest
    cache.put(KEYS[3], bytes(1000))
    assert [key in cache for key in KEYS[:4]] == [True, False, True, True]
    count, size = cache.size()
    assert count == 3 and size <= 3500


def test_a_value_larger_than_the_limit_is_not_kept(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path, limit_bytes=100)
    assert cache.put(KEYS[0], bytes(1000)) is False
    assert cache.size() == (0, 0)


def test_clear_leaves_other_files_alone(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path)
    for key in KEYS[:5]:
        cache.put(key, 1)
    (tmp_path / "letter.txt").write_text("mine")
    (tmp_path / "ab").mkdir(exist_ok=True)
    (tmp_path / "ab" / "letter.txt").write_text("mine")
    assert cache.clear() == 5
    assert cache.size() == (0, 0)
    assert (tmp_path / "letter.txt").exists() and (tmp_path / "ab" / "letter.txt").exists()


def test_leftovers_of_killed_writers_go_when_they_are_old(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path)
    cache.put(KEYS[0], 1)
    folder = cache.path(KEYS[0]).parent
    old, young = folder / "x-old.part", folder / "x-young.part"
    old.write_bytes(b"half")
    young.write_bytes(b"half")
    os.utime(old, (time.time() - 7200,) * 2)
    cache.evict()
    assert not old.exists() and young.exists()
    assert cache.get(KEYS[0]) == 1


def test_a_folder_that_cannot_be_written_never_fails_a_run(tmp_path: pathlib.Path) -> None:
    blocked = tmp_path / "file"
    blocked.write_text("not a folder")
    cache = StageCache(blocked / "cache")
    assert cache.put(KEYS[0], 1) is False
    assert cache.get_or_compute(KEYS[0], lambda: 7) == (7, False)
    assert cache.clear() == 0 and cache.size() == (0, 0)


def test_a_value_that_cannot_be_pickled_leaves_nothing_behind(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path)
    with pytest.raises((TypeError, AttributeError, __import__("pickle").PicklingError)):
        cache.put(KEYS[0], lambda: 1)
    assert not list(tmp_path.rglob("*.part")) and KEYS[0] not in cache


def test_keys_that_are_no_digest_are_refused(tmp_path: pathlib.Path) -> None:
    for bad in ("", "../../etc/passwd", "A" * 64, "a" * 63):
        with pytest.raises(ValueError, match="SHA-256"):
            StageCache(tmp_path).get(bad)
    with pytest.raises(ValueError, match="limit_bytes"):
        StageCache(tmp_path, limit_bytes=-1)


def test_folder_of_the_user(monkeypatch: pytest.MonkeyPatch, tmp_path: pathlib.Path) -> None:
    monkeypatch.setenv("SMS_RESOURCE_CACHE", str(tmp_path / "here"))
    assert user_cache_folder() == tmp_path / "here" == StageCache().folder
    monkeypatch.delenv("SMS_RESOURCE_CACHE")
    if sys.platform.startswith("linux"):
        monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "xdg"))
        assert user_cache_folder() == tmp_path / "xdg" / "sms_resource"


@pytest.mark.skipif(os.name != "posix", reason="permissions of POSIX")
def test_only_the_owner_can_write_to_the_folder(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path / "cache")
    cache.put(KEYS[0], 1)
    assert (tmp_path / "cache").stat().st_mode & 0o077 == 0
    assert cache.path(KEYS[0]).stat().st_mode & 0o077 == 0


WRITER = textwrap.dedent(
    """
    import sys
    import numpy as np
    from sms_resource.cache import StageCache, cache_key
    folder, first, limit = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
    cache = StageCache(folder, limit_bytes=limit)
    sys.stdout.write("ready\\n"); sys.stdout.flush()
    turn = 0
    while turn < 200 or limit > 10**6:
        number = (first + turn) % 12
        value = cache.get(cache_key(number))
        if value is not None:
            assert (value == number).all() and len(value) == 50_000, number
        cache.put(cache_key(number), np.full(50_000, number))
        turn += 1
    """
)


def start(folder: pathlib.Path, first: int, limit: int) -> subprocess.Popen[str]:
    command = [sys.executable, "-c", WRITER, str(folder), str(first), str(limit)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    assert process.stdout.readline() == "ready\n"
    return process


def sound(cache: StageCache) -> int:
    """Every file under an entry's name is whole and holds what its key says."""
    whole = 0
    for number in range(12):
        there = cache_key(number) in cache
        value = cache.get(cache_key(number))
        assert there == (value is not None), "a torn entry stood under its final name"
        if value is not None:
            assert (value == number).all() and len(value) == 50_000
            whole += 1
    return whole


@pytest.mark.skipif(os.name != "posix", reason="SIGKILL")
def test_killed_at_any_moment_the_cache_is_sound(tmp_path: pathlib.Path) -> None:
    rng = np.random.default_rng(5)
    cache = StageCache(tmp_path / "cache")
    whole = 0
    for turn in range(6):
        writers = [start(cache.folder, first, 10**9) for first in (turn, turn + 5)]
        time.sleep(float(rng.uniform(0.0, 0.08)))
        for writer in writers:
            writer.send_signal(signal.SIGKILL)
            writer.wait()
            writer.stdout.close()
            assert writer.returncode == -signal.SIGKILL  # it was killed at work, not ended by an error
        whole = sound(cache)
    assert whole > 0
    value, _ = cache.get_or_compute(cache_key(3), lambda: np.full(50_000, 3))
    assert (value == 3).all()


@pytest.mark.skipif(os.name != "posix", reason="subprocess timing")
def test_processes_share_a_cache_that_evicts_all_the_time(tmp_path: pathlib.Path) -> None:
    cache = StageCache(tmp_path / "cache", limit_bytes=900_000)  # two entries of 400 kB
    writers = [start(cache.folder, first, 900_000) for first in (0, 4)]
    for writer in writers:
        assert writer.wait(timeout=60) == 0
        writer.stdout.close()
    sound(cache)
    cache.evict()
    assert cache.size()[1] <= 900_000
    assert not list(cache.folder.rglob("*.part"))


@pytest.mark.parametrize(
    ("given", "wanted"), [("", 2e9), ("0.5", 5e8), ("0", 0), (" 3 ", 3e9), ("-1", 2e9), ("lots", 2e9)]
)
def test_the_limit_comes_from_the_environment(
    given: str, wanted: float, tmp_path: pathlib.Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("SMS_RESOURCE_CACHE_GB", given)
    assert StageCache(tmp_path).limit_bytes == wanted
    assert bool(limit_fault()) == (given in ("-1", "lots"))
    assert StageCache(tmp_path, limit_bytes=7).limit_bytes == 7


def test_the_command_shrinks_and_refuses_a_limit_that_is_none(
    tmp_path: pathlib.Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from typer.testing import CliRunner

    from sms_resource.cli import app

    monkeypatch.setenv("SMS_RESOURCE_CACHE", str(tmp_path))
    monkeypatch.setenv("SMS_RESOURCE_CACHE_GB", "0.003")
    store = StageCache()
    keys = [cache_key(number) for number in range(4)]
    for number, key in enumerate(keys):
        store.put(key, bytes(1_000_000))
        if key in store:
            os.utime(store.path(key), (number, number))
    assert [key in store for key in keys].count(True) == 2  # each is a little more than 1 MB
    assert "of at most 3 MB" in CliRunner().invoke(app, ["cache"]).output
    said = CliRunner().invoke(app, ["cache", "--shrink-to", "0.0015"])
    assert said.exit_code == 0 and "Removed 1 entries" in said.output and keys[-1] in store
    monkeypatch.setenv("SMS_RESOURCE_CACHE_GB", "lots")
    refused = CliRunner().invoke(app, ["cache"])
    assert refused.exit_code == 2 and "gigabytes" in refused.output
