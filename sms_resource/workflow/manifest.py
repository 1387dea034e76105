"""The manifest of a run: what went in, what came out, with which versions."""

from __future__ import annotations

import importlib.metadata
import json
import platform
import sys
from functools import cache
from pathlib import Path
from typing import Any

from sms_resource import __version__
from sms_resource.study import Study
from sms_resource.workflow.folder import NotResultsError
from sms_resource.workflow.stage import StageRecord, code_fingerprint, file_hash

_LIBRARIES = (
    "numpy", "scipy", "pandas", "numba", "scikit-gstat", "pyvista", "geopandas", "shapely", "rasterio", "pyproj",
    "pyogrio", "pyarrow", "pydantic", "matplotlib", "jinja2", "gsw", "xarray", "xlsxwriter", "typst",
)  # fmt: skip


# Formats that stand alone, and endings of what is read along with the others.
_TABLE_ENDINGS = frozenset(
    {".toml", ".csv", ".xlsx", ".xlsm", ".parquet", ".pq", ".json", ".geojson", ".gpkg"}
)
_BESIDE = frozenset({".dbf", ".shx", ".prj", ".cpg", ".hdr", ".tfw", ".tifw", ".wld", ".asw", ".agw", ".stx"})


@cache
def versions() -> dict[str, str]:
    """Version of the package, of Python and of the libraries that make the numbers."""
    found = {"sms_resource": __version__, "python": platform.python_version()}
    for name in _LIBRARIES:
        try:
            found[name] = importlib.metadata.version(name)
        except importlib.metadata.PackageNotFoundError:
            found[name] = "not installed"
    return found


def companions(path: Path) -> list[Path]:
    """Files beside a grid or a layer that its readers open with it, by name."""
    ending = path.suffix.lower()
    if ending in _TABLE_ENDINGS:
        return []
    return sorted(
        other
        for other in path.parent.iterdir()
        if other != path
        and other.is_file()
        and (
            (other.stem == path.stem and other.suffix.lower() in _BESIDE)
            or (other.name.startswith(f"{path.name}.") and other.suffix.lower() in (".xml", ".msk"))
        )
    )


def input_hashes(study: Study) -> dict[str, dict[str, Any]]:
    """Hash, size and place of every input file, by role, the study itself first.

    What stands beside a file and is read with it (attributes and system of a shapefile, world file of a raster) is an
    input of its own, under its role and its ending.
    """
    entries: dict[str, dict[str, Any]] = {}
    folder = study.folder.resolve()
    for role, file in {"study": study.path.name, **study.files()}.items():
        path = study.resolve(file)
        if not path.is_file():
            continue
        for name, part in {role: path, **{f"{role} {p.name}": p for p in companions(path)}}.items():
            entries[name] = {
                "file": file if part == path else (Path(file).parent / part.name).as_posix(),
                "sha256": file_hash(part),
                "bytes": part.stat().st_size,
                "outside_folder": not part.is_relative_to(folder),
            }
    return entries


def output_hashes(folder: Path) -> dict[str, str]:
    """SHA-256 of every file of a folder, by its relative path; the manifest and what was measured are left out."""
    return {
        path.relative_to(folder).as_posix(): file_hash(path)
        for path in sorted(folder.rglob("*"))
        if path.is_file() and path.name != "manifest.json" and path.parent != folder / "measured"
    }


def write_manifest(
    folder: Path,
    study: Study,
    inputs: dict[str, dict[str, Any]],
    records: list[StageRecord],
    facts: dict[str, Any],
) -> Path:
    """Write manifest.json into a folder of results.

    Parameters
    ----------
    folder : Path
        Where the results are.
    study : Study
    inputs : dict
        From :func:`input_hashes`.
    records : list of StageRecord
    facts : dict
        Anything else a reader of the results needs, such as the summary of the table of tonnes.
    """
    content = {
        "format": 1,
        "study": {
            "name": study.config.study.name,
            "file": study.path.name,
            "folder": str(study.folder),
            "seed": study.config.study.seed,
            "resolved": study.config.model_dump(mode="json"),
            "given": json.loads(json.dumps(study.given, default=str)),
        },
        "inputs": inputs,
        "outputs": output_hashes(folder),
        "versions": versions(),
        "code": code_fingerprint(),
        "platform": {
            "system": platform.system(),
            "machine": platform.machine(),
            "python": sys.version.split()[0],
        },
        "stages": [
            {
                "name": r.name,
                "seconds": round(r.seconds, 3),
                "from_cache": r.from_cache,
                "key": r.key,
                "detail": r.detail,
            }
            for r in records
        ],
        **facts,
    }
    path = folder / "manifest.json"
    path.write_text(json.dumps(content, indent=1, ensure_ascii=False), encoding="utf-8")
    return path


def read_manifest(folder: Path) -> dict[str, Any]:
    """The manifest of a folder of results.

    Raises
    ------
    FileNotFoundError
        If the folder holds no results.
    NotResultsError
        If its manifest is damaged.
    """
    text = (folder / "manifest.json").read_text(encoding="utf-8", errors="replace")
    try:
        found = json.loads(text)
    except json.JSONDecodeError:
        found = None
    wanted = {"study", "inputs", "outputs", "versions"}
    if not isinstance(found, dict) or not wanted <= set(found):
        raise NotResultsError(f"the manifest of {folder} is damaged")
    return found
