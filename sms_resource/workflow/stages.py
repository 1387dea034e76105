"""The stages in order, and what of the study each depends on."""

from __future__ import annotations

from sms_resource.workflow import (
    continuity,
    estimation,
    evidence,
    geometry,
    load,
    outcome,
    proposal,
    validation,
)
from sms_resource.workflow.stage import Also, Stage
from sms_resource.workflow.tonnage_tables import cut_on_worth

_SAMPLES = ("metals", "domains", "composites")

LOAD = Stage("load", "Reading the files", ("study", "data", "metals"), (), load.load, reads_files=True)
CHECK = Stage(
    "check", "Checking the data", ("study", "checks", "metals", "seafloor", "domains"), ("load",), load.check
)
COMPOSITE = Stage(
    "composite",
    "Joining samples",
    (
        "study",
        "assays",
        "position",
        "seafloor",
        "checks",
        "surface_samples",
        "laboratory",
        "associations",
        *_SAMPLES,
    ),
    ("load", "check"),
    evidence.composite,
)
DENSITY = Stage(
    "density", "Fitting densities", ("density", "metals", "domains"), ("load", "composite"), evidence.density
)
BODY = Stage(
    "body",
    "Bounding the body",
    ("study", "data", "seafloor", "body", "chimneys", "domains", "surface_samples"),
    ("load", "composite"),
    geometry.body,
)
BLOCKS = Stage("blocks", "Filling the blocks", ("blocks", "domains"), ("composite", "body"), geometry.blocks)
VARIOGRAMS = Stage(
    "variograms",
    "Inferring continuity",
    ("variograms", "top_cuts", "chimneys", *_SAMPLES),
    ("composite", "body", "blocks"),
    continuity.variograms,
)
ESTIMATE = Stage(
    "estimate",
    "Estimating blocks",
    ("search", "kriging", "variograms", *_SAMPLES),
    ("blocks", "density", "variograms"),
    estimation.estimate,
)
VALIDATE = Stage(
    "validate",
    "Checking the estimate",
    (
        "study",
        "validation",
        "search",
        "kriging",
        "variograms",
        "top_cuts",
        "cutoff",
        "seafloor",
        "classes",
        *_SAMPLES,
    ),
    ("load", "composite", "body", "blocks", "density", "variograms", "estimate"),
    validation.validate,
)
PROPOSE = Stage(
    "propose",
    "Proposing classes",
    ("study", "data", "prospects", "position", "classes", "screens", "density", "seafloor", "surface_samples",
     "metals", "domains"),
    ("load", "composite", "density", "body", "blocks", "variograms", "estimate"),
    proposal.propose,
    extends="estimate",
)  # fmt: skip
VALUE = Stage(
    "value",
    "Valuing the blocks",
    ("cutoff", "value", "metals", "domains"),
    ("propose",),
    outcome.value,
    extends="propose",
)
# What a price changes is summed again only where the cut-off is on it.
CLASSIFY = Stage(
    "classify",
    "Summing tonnes",
    ("screens", "cutoff", "metals", "domains"),
    ("density", "body", "blocks", "propose"),
    outcome.classify,
    also=Also(cut_on_worth, ("value",), ("value",)),
)

CHECK_STAGES = (LOAD, CHECK)
ESTIMATE_STAGES = (
    LOAD, CHECK, COMPOSITE, DENSITY, BODY, BLOCKS, VARIOGRAMS, ESTIMATE, VALIDATE, PROPOSE, VALUE, CLASSIFY,
)  # fmt: skip
