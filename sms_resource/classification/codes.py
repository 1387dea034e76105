"""Codes of the findings of this room, each with one line of meaning."""

from __future__ import annotations

CODES: dict[str, str] = {
    "class-no-drilling": "no hole informs the deposit: at most a range for an exploration target",
    "class-inferred-richer": "Inferred blocks are richer than Indicated: extrapolated tonnage lies in the best material",
    "class-extrapolated": "the share of classified tonnes that lies beyond drilling, with the greatest distance",
    "class-prospects-not-judged": "nobody is named who judged the prospects, so the table is a block-model tally",
    "class-override": "blocks whose proposed class was replaced inside a polygon, with the reason",
    "class-override-refused": "an override lacks its reason, its author, or a class that may be proposed",
    "class-override-empty": "an override polygon holds no block",
    "class-domain-unknown": "a domain of the block model has no figure for recovery or density in the class context",
    "class-measured": "the study's own criteria name Measured and blocks meet every one of them",
    "class-smoothed": "how many blocks and dry tonnes changed class when classes were smoothed to connected volumes",
}

# What a block's reason column may hold.
REASONS: dict[str, str] = {
    "no-drilling": "no hole informs the deposit",
    "not-estimated": "the block has no estimate of the metal that classes are judged on",
    "measured-holes": "too few holes inform the block for Measured",
    "measured-samples": "too few samples inform the block for Measured",
    "measured-distance": "the nearest sample is too far for Measured",
    "measured-slope": "the slope of regression is too low for Measured",
    "indicated-holes": "too few holes inform the block for Indicated",
    "indicated-samples": "too few samples inform the block for Indicated",
    "indicated-distance": "the nearest sample is too far for Indicated",
    "indicated-slope": "the slope of regression is too low for Indicated",
    "inferred-holes": "too few holes inform the block for Inferred",
    "inferred-samples": "too few samples inform the block for Inferred",
    "inferred-distance": "the nearest sample is too far for Inferred",
    "inferred-slope": "the slope of regression is too low for Inferred",
    "extrapolated": "the block lies beyond drilling: not above Inferred",
    "laboratory-quality": "quality control of assays is missing or failed: not above Inferred",
    "recovery-caution": "core recovery is in the caution band, absence of bias is not shown: not above Inferred",
    "variogram-assumed": "continuity is assumed, not found in the data: not above Inferred",
    "low-recovery": "mean core recovery of the domain is too low: down one class",
    "few-holes-in-range": "too few holes lie within the variogram range: down one class",
    "beyond-range": "the nearest hole lies beyond the variogram range: down one class",
    "open-ended": "the hole of the column ended in sulphide: down one class",
    "few-densities": "too few densities were measured in the domain: down one class",
    "position-uncertain": "positions are uncertain by more than their share of a block: down one class",
    "surface-samples-used": "surface samples inform the estimate: down one class",
    "handheld-used": "handheld assays inform the estimate: down one class",
    "low-slope": "the slope of regression is too low: down one class",
    "smoothed-up": "raised when classes were smoothed to connected volumes",
    "smoothed-down": "lowered when classes were smoothed to connected volumes",
    "override": "replaced inside a polygon, with a reason",
}
