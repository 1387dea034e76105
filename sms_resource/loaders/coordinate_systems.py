"""Coordinate systems compared, and refused with a reason."""

from __future__ import annotations

from typing import Any

from sms_resource.findings import Findings


def parse_crs(text: Any) -> Any:
    """A pyproj CRS of what a file or a study says; None where it means none.

    A compound system gives its horizontal part; vertical datums are never transformed.
    """
    from pyproj import CRS
    from pyproj.exceptions import CRSError

    if text is None or text == "":
        return None
    try:
        crs = CRS.from_user_input(text)
    except CRSError:
        return None
    if crs.is_compound:
        crs = crs.sub_crs_list[0]
    if crs.is_bound and crs.source_crs is not None:
        crs = crs.source_crs
    return crs if crs.is_projected or crs.is_geographic else None


def same_crs(a: Any, b: Any) -> bool:
    """Whether two pyproj systems place coordinates alike, whatever they are called."""
    if a.equals(b, ignore_axis_order=True):
        return True
    codes = a.to_epsg(min_confidence=70), b.to_epsg(min_confidence=70)
    return codes[0] is not None and codes[0] == codes[1]


def crs_name(crs: Any) -> str:
    """Short name of a pyproj system: authority and code, else its title."""
    authority = crs.to_authority(min_confidence=70)
    return ":".join(authority) if authority else str(crs.name)


def agree_crs(
    found: Any, declared: str | None, study: str | None, what: str, name: str, findings: Findings
) -> tuple[Any, Any] | None:
    """System of the file and of the study, as pyproj systems; None, with a finding, where the file has none.

    Parameters
    ----------
    found : pyproj CRS or None
        What the file says.
    declared : str, optional
        What the study says of the file.
    study : str, optional
        System of the study; the file's own if None.
    what : str
        "grid" or "layer", for the messages.
    """
    stated = parse_crs(declared)
    target = parse_crs(study)
    for text, crs in ((declared, stated), (study, target)):
        if text and crs is None:
            findings.error(
                "crs-unknown",
                f"{text!r} is not a coordinate system that is known.",
                'Write an EPSG code, such as crs = "EPSG:32702".',
                file=name,
            )
            return None
    if found is not None and stated is not None and not same_crs(found, stated):
        findings.error(
            "crs-different",
            f"The file says {crs_name(found)}, the study says of it {crs_name(stated)}.",
            "Take the crs of this file out of the study, or mend the file.",
            file=name,
        )
        return None
    source = found if found is not None else stated
    if source is None:
        findings.error(
            "crs-missing",
            f"The {what} does not say in which coordinate system it is.",
            f'State it with crs = "EPSG:..." beside the file in the study, or export the {what} with it '
            "(a .prj file beside a text grid does).",
            file=name,
        )
        return None
    return source, target if target is not None else source


def metric(crs: Any, what: str, name: str, findings: Findings) -> bool:
    """Whether a projected system is in metres; a finding if not."""
    factor = crs.axis_info[0].unit_conversion_factor if crs.axis_info else 1.0
    if crs.is_projected and abs(factor - 1.0) > 1e-9:
        findings.error(
            "crs-not-metres",
            f"The {what} is in {crs_name(crs)}, whose unit is {crs.axis_info[0].unit_name}.",
            "Reproject it to a projected system in metres.",
            file=name,
        )
        return False
    return True
