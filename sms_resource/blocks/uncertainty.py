"""How far the geometry alone moves the volume, and with it the dry tonnes."""

from __future__ import annotations

import math

import pandas as pd

from sms_resource.blocks.body import Body


def geometry_uncertainty(
    body: Body,
    *,
    seafloor_sigma_m: float = 0.3,
    outline_m: float = 5.0,
    dry_density_tpm3: float | None = None,
) -> pd.DataFrame:
    """Volume of the body with each surface moved by its uncertainty, one at a time.

    Parameters
    ----------
    body : Body
    seafloor_sigma_m : float
        Standard deviation in m of an error that the whole seafloor shares against the holes (datum, tide,
        position); errors of single cells average out.
    outline_m : float
        Distance in m by which the outline may lie further out or in.
    dry_density_tpm3 : float, optional
        Mean dry density; adds dry tonnes.

    Returns
    -------
    DataFrame
        case, what, volume_m3, change_m3, change_pct (and dry_tonnes, change_dry_tonnes).
        "base_mean" moves the volume by the standard deviation of the interpolated volume;
        "base_everywhere" lowers or raises the base by one standard deviation at every point at once, which is
        far less likely; "outline_in" interpolates the base anew from the holes that are still inside, and does not
        have to make the body smaller: these holes keep their thickness, so the base falls more steeply from the
        edge; "outline_cut" leaves the base as it is; "together" is the root of the sum of squares of base_mean,
        seafloor and outline (half the span of its cases), taken as independent.

    Raises
    ------
    ValueError
        If a length is negative or a density is not positive.
    """
    for name, value in (("seafloor_sigma_m", seafloor_sigma_m), ("outline_m", outline_m)):
        if not (math.isfinite(value) and value >= 0):
            raise ValueError(f"{name} must be a length of at least 0 m, not {value!r}")
    if dry_density_tpm3 is not None and not dry_density_tpm3 > 0:
        raise ValueError(f"dry_density_tpm3 must be positive, not {dry_density_tpm3!r}")
    base = body.volume_m3
    rows = [("base_case", "the body as interpolated", base)]
    sigma = body.volume_sigma_m3
    if math.isfinite(sigma):
        rows.append(("base_mean_down", "base lower: one standard deviation of the volume", base + sigma))
        rows.append(
            ("base_mean_up", "base higher: one standard deviation of the volume", max(base - sigma, 0.0))
        )
        for name, what, factor in (("down", "lower", 1.0), ("up", "higher", -1.0)):
            volume = body.scaled_sigma(factor).volume_m3
            rows.append(
                (f"base_everywhere_{name}", f"base {what} by one standard deviation at every point", volume)
            )
    for name, what, sign in (("up", "higher", 1.0), ("down", "lower", -1.0)):
        volume = body.shifted(top_m=sign * seafloor_sigma_m).volume_m3
        rows.append(
            (f"seafloor_{name}", f"seafloor {what} by {seafloor_sigma_m:g} m against the holes", volume)
        )
    moved: list[float] = []
    if outline_m > 0 and body.recipe:
        inner = body.outline.buffer(-outline_m)
        cases = [
            ("out", "further out, base interpolated anew", lambda: body.shifted(outline_m=outline_m)),
            ("in", "further in, base interpolated anew", lambda: body.shifted(outline_m=-outline_m)),
            ("cut", "further in, body cut off there", lambda: body.cut(inner)),
        ]
        for name, what, make in cases:
            volume = 0.0 if name != "out" and inner.is_empty else make().volume_m3
            moved.append(volume)
            rows.append((f"outline_{name}", f"outline {outline_m:g} m {what}", volume))
    changes = {case: volume - base for case, _, volume in rows}
    terms = [
        sigma if math.isfinite(sigma) else 0.0,
        0.5 * (changes["seafloor_up"] - changes["seafloor_down"]),
        0.5 * (max(moved) - min(moved)) if moved else 0.0,
    ]
    together = math.sqrt(sum(term * term for term in terms))
    rows.append(("together_high", "base, seafloor and outline together: thicker", base + together))
    rows.append(("together_low", "base, seafloor and outline together: thinner",
                 max(base - together, 0.0)))  # fmt: skip
    frame = pd.DataFrame(rows, columns=["case", "what", "volume_m3"])
    frame["change_m3"] = frame["volume_m3"] - base
    frame["change_pct"] = 100.0 * frame["change_m3"] / base if base > 0 else math.nan
    if dry_density_tpm3 is not None:
        frame["dry_tonnes"] = frame["volume_m3"] * dry_density_tpm3
        frame["change_dry_tonnes"] = frame["change_m3"] * dry_density_tpm3
    return frame
