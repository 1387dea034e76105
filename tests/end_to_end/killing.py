"""Kill runs at random moments and look at what is left; a script, so that every run is a fresh child of one process.

Usage: python -m tests.end_to_end.killing FOLDER TRIALS SEED. Prints JSON: trials, moments, faults. The children leave
out figures and page, which take most of a run's time and are written to the same staging folder as the rest.
"""

from __future__ import annotations

import json
import os
import random
import shutil
import signal
import sys
import time
from pathlib import Path
from typing import Any

import pandas  # noqa: F401  before the fork, once
import scipy.stats  # noqa: F401

import sms_resource.workflow.publish as publish
from sms_resource import load_study, run_study
from sms_resource.cache import StageCache
from sms_resource.workflow.stages import ESTIMATE_STAGES
from tests.end_to_end.places import contents, tree
from tests.end_to_end.small_study import SmallStudy

EVENTS = [*(stage.name for stage in ESTIMATE_STAGES), "report", "end"]
MISSING = object()


def light(folder: Path, *_: Any) -> list[Path]:
    """In place of figures and page: files of some size."""
    made = []
    for number in range(20):
        made.append(folder / "figures" / f"{number}.bin")
        made[-1].parent.mkdir(exist_ok=True)
        made[-1].write_bytes(bytes([number]) * 200_000)
    return made


publish.write_report_files = light  # type: ignore[assignment]


class Told:
    """Tells the parent of each stage that starts, by its number."""

    def __init__(self, pipe: int) -> None:
        self.pipe = pipe

    def started(self, name: str, label: str) -> None:
        os.write(self.pipe, bytes([EVENTS.index(name)]))

    def finished(self, name: str, seconds: float, detail: str, from_cache: bool) -> None:
        if name == "report":
            os.write(self.pipe, bytes([EVENTS.index("end")]))


def start(study: Path, out: Path, cache: Path) -> tuple[int, int]:
    """A run in a child: its process and the pipe on which it tells where it is."""
    reads, writes = os.pipe()
    child = os.fork()
    if child:
        os.close(writes)
        return child, reads
    os.close(reads)
    code = 1
    try:
        result = run_study(load_study(study), out, progress=Told(writes), threads=1, cache=StageCache(cache))
        code = 0 if result.out else 3
    finally:
        os._exit(code)


def spell(study: SmallStudy, number: int) -> None:
    """The study of a trial: most trials change a screen, each fifth the search, so that much is run again."""
    study.toml["screens"]["least_thickness_m"] = round(0.5 + 0.01 * number, 2)
    study.toml["search"] = {"most_samples": 16 - (number // 5) % 6}
    study.path.write_text(_toml(study), encoding="utf-8")


def _toml(study: SmallStudy) -> str:
    from tests.end_to_end.small_study import toml

    return toml(study.toml)


def stated(out: Path) -> tuple[float, int]:
    """Which trial some results are of; they must be whole."""
    manifest = json.loads((out / "manifest.json").read_text(encoding="utf-8"))
    assert manifest["outputs"] == contents(out), "results are not whole"
    resolved = manifest["study"]["resolved"]
    return resolved["screens"]["least_thickness_m"], resolved["search"]["most_samples"]


def sound(cache: Path) -> None:
    """Every entry of a cache is whole."""
    store = StageCache(cache)
    for path in cache.glob("*/*.stage"):
        assert store.get(path.stem, MISSING) is not MISSING, f"a broken entry: {path.name}"


def trial(folder: Path, study: SmallStudy, number: int, chance: random.Random) -> str:
    """Kill one run; returns where it was."""
    out, cache = folder / "results", folder / "cache"
    if number % 10 == 9:
        shutil.rmtree(cache)  # the whole of it again
    spell(study, number)
    before, was = tree(out), stated(out)
    child, pipe = start(study.path, out, cache)
    aim = chance.choice(EVENTS)
    where = "start"
    while where != aim:
        told = os.read(pipe, 1)
        if not told:
            break
        where = EVENTS[told[0]]
    time.sleep(chance.random() * (0.02 if aim == "end" else 0.25))
    os.kill(child, signal.SIGKILL)
    _, status = os.waitpid(child, 0)
    os.close(pipe)
    wanted = (study.toml["screens"]["least_thickness_m"], study.toml["search"]["most_samples"])
    now = stated(out)
    assert now in (was, wanted), f"results of neither: {now}"
    if now == was:
        assert tree(out) == before, "the last results were touched"
    sound(cache)
    seen = {path.name for path in folder.iterdir() if not path.name.startswith(".")}
    assert seen == {"results", "cache", "study"}, seen
    return f"{where}{'' if os.WIFSIGNALED(status) else ' (had ended)'}"


def whole(study: Path, out: Path, cache: Path) -> None:
    """A run that nobody disturbs."""
    child, pipe = start(study, out, cache)
    _, status = os.waitpid(child, 0)
    os.close(pipe)
    assert os.WIFEXITED(status) and os.WEXITSTATUS(status) == 0, f"the run ended with {status}"


def main(folder: Path, trials: int, seed: int) -> dict[str, Any]:
    study = SmallStudy(folder / "study")
    study.write()
    whole(study.path, folder / "results", folder / "cache")
    chance = random.Random(seed)
    moments: list[str] = []
    faults: list[str] = []
    for number in range(1, trials + 1):
        try:
            moments.append(trial(folder, study, number, chance))
        except AssertionError as error:
            faults.append(f"trial {number}: {error}")
    whole(study.path, folder / "results", folder / "cache")
    hidden = [path.name for path in folder.iterdir() if path.name.startswith(".")]
    if hidden:
        faults.append(f"left over: {hidden}")
    whole(study.path, folder / "undisturbed", folder / "fresh")
    one, other = contents(folder / "results"), contents(folder / "undisturbed")
    faults += [f"other bytes: {name}" for name in {*one, *other} if one.get(name) != other.get(name)]
    return {"trials": trials, "moments": moments, "faults": faults}


if __name__ == "__main__":
    json.dump(main(Path(sys.argv[1]), int(sys.argv[2]), int(sys.argv[3])), sys.stdout)
