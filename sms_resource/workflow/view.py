"""Open results in a window."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from sms_resource.workflow.folder import has_blocks, is_results, recover


def view_results(
    folder: Path,
    *,
    screenshot: Path | None = None,
    variable: str | None = None,
    cutoff: float | None = None,
    exaggeration: float = 1.0,
    **options: Any,
) -> str | None:
    """Show results in a window, or draw them into a file; further options are those of ``viewer.open_scene``.

    Returns
    -------
    str or None
        What is wrong, and what to do, where nothing could be shown.

    Raises
    ------
    FileNotFoundError
        If the folder holds no results, or none with a block model.
    """
    recover(Path(folder).absolute())
    if not is_results(Path(folder)):
        raise FileNotFoundError(
            f"{folder} holds no results. Make them with: sms-resource run STUDY --out {folder}"
        )
    if not has_blocks(Path(folder)):
        raise FileNotFoundError(f"{folder} holds no block model; a study without drilling has none")
    from sms_resource.viewer import ViewerUnavailable, open_scene

    try:
        open_scene(
            folder,
            screenshot=screenshot,
            variable=variable,
            cutoff=cutoff,
            exaggeration=exaggeration,
            **options,
        )
    except (ViewerUnavailable, ValueError, OSError) as error:
        return str(error)
    return None
