"""Names that files give to the canonical columns, in small letters and without separators or units."""

from __future__ import annotations

import re
from collections.abc import Mapping

from sms_resource.loaders.headers import canonical_text

_UNIT_WORDS = frozenset({
    "m", "metre", "metres", "meter", "meters", "cm", "mm", "g", "kg", "cm3", "cm³", "deg", "degree", "degrees", "°", "pct",
    "%", "percent", "t/m3", "t/m³", "tpm3", "g/cm3", "g/cm³", "gcm3", "g/cc", "kg/m3", "kg/m³", "kgm3", "ft", "feet",
    "mbsf", "mbsl", "mbrsf",
})  # fmt: skip
_HOLE = (
    "holeid hole bhid dhid drillhole drillholeid holename holeno holenumber borehole boreholeid well hole#"
)
_INTERVAL = {
    "from_m": "from depthfrom start top topm startdepth fromdepth runfrom intervalfrom sampfrom upper depthtop",
    "to_m": "to depthto end bottom enddepth todepth runto intervalto sampto lower depthbottom base",
}
_PLACE = {
    "easting": "easting east x utme eastingutm utmx xcoord xutm xcoordinate e eastutm posx",
    "northing": "northing north y utmn northingutm utmy ycoord yutm ycoordinate n northutm posy",
    "elevation": "elevation elev z rl altitude height zcoord seafloorelevation depth waterdepth seafloordepth depthbsl wd "
    "bottomdepth",
}
_SAMPLE = "sampleid sample sampleno samplenumber sampid sampleref samplename labno labid labnumber id"
_METHOD = "method assaymethod analysis analyticalmethod analysismethod technique"
_SIGMA = "positionsigma possigma sigma positionerror uncertainty accuracy posaccuracy posuncertainty navuncertainty"

_RAW: Mapping[str, Mapping[str, str]] = {
    "collars": {
        "hole_id": _HOLE,
        **_PLACE,
        "length_m": "length totaldepth td eoh maxdepth holelength finaldepth holedepth depthdrilled drilledlength endofhole "
        "totallength depth",
        "azimuth": "azimuth azi az bearing",
        "dip": "dip",
        "ended_in": "endedin endin ended endreason terminatedin bottomedin holeended",
        "position_method": "positionmethod posmethod navigation nav navmethod positioning",
        "position_sigma_m": _SIGMA,
    },
    "surveys": {
        "hole_id": _HOLE,
        "depth_m": "depth at md surveydepth measureddepth stationdepth distance",
        "azimuth": "azimuth azi az bearing",
        "dip": "dip plunge",
    },
    "runs": {
        "hole_id": _HOLE,
        **_INTERVAL,
        "recovered_length_m": "recoveredlength recovered corerecovered recoveredcore corelength reclength "
        "recoverylength rec",
        "recovery_pct": "recovery recoverypct recpct corerecovery tcr recoverypercent recperc",
    },
    "lithology": {
        "hole_id": _HOLE,
        **_INTERVAL,
        "code": "code rock lith lithology litho lithcode rockcode rocktype lithocode geology facies",
    },
    "assays": {"hole_id": _HOLE, "sample_id": _SAMPLE, **_INTERVAL, "method": _METHOD},
    "densities": {
        "hole_id": _HOLE,
        "sample_id": _SAMPLE,
        **_INTERVAL,
        "wet_density_tpm3": "wetdensity wet wetbulkdensity bulkdensitywet densitywet wbd",
        "dry_density_tpm3": "drydensity dry drybulkdensity bulkdensitydry densitydry dbd",
        "grain_density_tpm3": "graindensity densitygrain particledensity",
        "wet_mass_g": "wetmass masswet wetweight weightwet",
        "dry_mass_g": "drymass massdry dryweight weightdry",
        "dry_volume_cm3": "dryvolume volumedry grainvolume",
    },
    "surface_samples": {
        "sample_id": _SAMPLE,
        "sample_type": "sampletype type samplekind kind",
        **_PLACE,
        "position_sigma_m": _SIGMA,
        "method": _METHOD,
    },
    "dredges": {
        "dredge_id": "dredgeid dredge haul dredgeno tow towid station id",
        "start_easting": "starteasting onbottome onbottomeasting starte startx eastingstart x1 e1 onbottomx",
        "start_northing": "startnorthing onbottomn onbottomnorthing startn starty northingstart y1 n1 onbottomy",
        "end_easting": "endeasting offbottome offbottomeasting ende endx eastingend x2 e2 offbottomx",
        "end_northing": "endnorthing offbottomn offbottomnorthing endn endy northingend y2 n2 offbottomy",
        "start_elevation": "startelevation onbottomdepth startdepth onbottomelevation depthstart z1 startz",
        "end_elevation": "endelevation offbottomdepth enddepth offbottomelevation depthend z2 endz",
        "method": _METHOD,
    },
    "laboratory": {
        "kind": "kind qctype type insert inserttype controltype qaqctype sampletype",
        "batch": "batch batchno batchid job despatch dispatch certificate workorder",
        "sequence": "sequence seq order position seqno",
        "sample_id": _SAMPLE,
        "original_sample_id": "originalsampleid original originalno originalid parent originalsample dupof duplicateof "
        "parentsample",
        "material": "material standard crm referencematerial stdid standardid",
        "stage": "stage duplicatestage",
        "element": "element analyte",
        "value": "value result assay",
        "original_value": "originalvalue originalresult",
        "unit": "unit units uom",
        "expected": "expected certified certifiedvalue expectedvalue target",
        "expected_sd": "expectedsd sd stddev certifiedsd standarddeviation",
    },
    "base_points": dict(_PLACE),
}

DEPTH_WORDS = ("depth", "wd", "bsl")
"""Parts of a header that say that a vertical position is a depth."""


def bare_name(header: str) -> str:
    """Header in small letters, without separators and without a unit at its end."""
    words = [word for word in canonical_text(header).split("_") if word]
    while len(words) > 1 and words[-1] in _UNIT_WORDS:
        words.pop()
    return re.sub(r"[^a-z0-9#]", "", "".join(words))


SYNONYMS: Mapping[str, Mapping[str, tuple[str, ...]]] = {
    role: {name: (name.replace("_", ""), *text.split()) for name, text in columns.items()}
    for role, columns in _RAW.items()
}
"""Role, canonical column, and the bare names that stand for it, the most telling first."""
