"""Codes of the findings about a study file, each with its meaning."""

CODES: dict[str, str] = {
    "file-missing": "A file that the study names does not exist.",
    "file-outside": "A file that the study names lies outside the folder of the study.",
    "study-crs": "The coordinate system of the study is unknown, not projected or not in metres.",
    "study-domain": "A domain is named that no logged code leads to.",
    "study-encoding": "The study file is not UTF-8 text.",
    "study-key": "An override names a key that cannot be set.",
    "study-metal": "An element is named that is not estimated.",
    "study-missing": "The study file cannot be read.",
    "study-missing-key": "A key that must be given is missing.",
    "study-no-drilling": "Surface samples are given without holes, which carry no block estimate.",
    "study-syntax": "The study file is not valid TOML.",
    "study-unknown-key": "A key is not known.",
    "study-value": "A value does not fit its key.",
    "study-value-missing": "A choice needs another key that is empty.",
}
