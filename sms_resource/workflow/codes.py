"""Codes of the findings that the stages themselves make, each with its meaning."""

CODES: dict[str, str] = {
    "against-unreadable": "Another run cannot be compared with this one.",
    "blocks-beyond-search": "Blocks were estimated from samples beyond every search pass.",
    "blocks-empty": "No block of the block model touches the body.",
    "blocks-not-estimated": "Blocks have no estimate of some metal.",
    "blocks-too-many": "The block model asks for more blocks than are allowed.",
    "cutoff-unknown": "No block has the variable that the study cuts on.",
    "chimney-height": "Polygons of chimneys have no height.",
    "equivalent-refused": "A metal equivalent or a value cannot be made from what the study states.",
    "neighbourhood-study": "What the study of neighbourhoods recommends.",
    "no-composites": "No sample lies in a domain of the body.",
    "outline-proposed": "The outline of the body was proposed by the tool.",
    "run-differs": "What differs from another run beside its decisions.",
    "scenario-failed": "A scenario could not be run.",
    "scenario-invalid": "The list of scenarios holds one that cannot be.",
    "stage-refused": "A stage cannot work with a value that the study or its data give it.",
    "top-cut-proposed": "Top cuts that the tool proposes were applied.",
    "truth-unreadable": "The known truth of an invented deposit cannot be read.",
    "validation-flag": "A check of the estimate is outside its limit.",
}
