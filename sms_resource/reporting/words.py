"""Explanations and sources that every report prints."""

from __future__ import annotations

SOURCES: tuple[str, ...] = (
    (
        "CRIRSCO (2019), International Reporting Template for the public reporting of exploration targets,"
        " exploration results and mineral estimates."
    ),
    (
        "International Seabed Authority (2015), ISBA/21/LTC/15, annex V: reporting standard for mineral"
        " exploration in the Area."
    ),
    (
        "Annels, A. E. & Dominy, S. C. (2003), Core recovery and quality: important factors in mineral"
        " resource estimation. Applied Earth Science 112, 305–312."
    ),
    (
        "Isaaks, E. H. & Srivastava, R. M. (1989), An Introduction to Applied Geostatistics. Oxford"
        " University Press."
    ),
    "Journel, A. G. & Huijbregts, C. J. (1978), Mining Geostatistics. Academic Press.",
    (
        "Krige, D. G. (1997), A practical analysis of the effects of spatial structure and of data available"
        " and accessed on conditional biases in ordinary kriging. Geostatistics Wollongong '96, 799–810."
    ),
    (
        "Abzalov, M. (2008), Quality control of assay data: a review of procedures for measuring and"
        " monitoring precision and accuracy. Exploration and Mining Geology 17, 131–144."
    ),
    (
        "Stanley, C. R. & Lawie, D. (2007), Average relative error in geochemical determinations. Exploration"
        " and Mining Geology 16, 267–275."
    ),
    (
        "Stephenson, P. R. et al. (2006), Mineral resource classification: it's time to shoot the spotted"
        " dog! Sixth International Mining Geology Conference, 91–95."
    ),
    "Blum, P. (1997), Physical properties handbook. ODP Technical Note 26.",
    (
        "Hannington, M. et al. (2011), The abundance of seafloor massive sulfide deposits. Geology 39,"
        " 1155–1158."
    ),
    (
        "Nuñez, J. R. et al. (2018), Optimizing colormaps with consideration for color vision deficiency."
        " PLoS ONE 13, e0199239 (colours of the figures)."
    ),
)

SECTION_INTRODUCTIONS: dict[str, str] = {
    "decisions": (
        "Every decision of the study is a row of the ledger. These move the estimate most, or were chosen"
        " rather than left at their default."
    ),
    "evidence": (
        "What the samples are worth before anything is estimated: where they are, how much core came back,"
        " what the laboratory's checks say."
    ),
    "body": (
        "The body lies between the seafloor and an interpolated base, inside its outline. Its volume drives"
        " the tonnes."
    ),
    "continuity": (
        "How far a grade carries, and how much of that was inferred from the samples rather than assumed."
    ),
    "estimate": "The grades of the blocks, and the checks of them.",
    "classes": "Proposed from the criteria of the study, with the reasons; the Competent Person decides.",
    "tonnes": "Tonnes and grade by proposed class. Classes are shown apart wherever they are summed.",
    "scenarios": (
        "How the estimate moves when a decision moves. Each scenario is a run of the study with the named"
        " keys changed."
    ),
    "ledger": (
        "Every decision of the study: its value, whether it is a default or was chosen, why, by whom, and"
        " what else it could be."
    ),
    "cautions": (
        "What a reader has to know before using a number of this report. Each caution prints the figures that"
        " set it off."
    ),
    "findings": "What the checks found in the data. Errors would have stopped the run.",
    "truth": (
        "The deposit of this study is invented and its truth is known: the estimate is put against it here."
    ),
    "method": "Plain words, true of this run, to paste into a technical report.",
    "sources": (
        "Methods and standards that the report leans on. Details recalled from memory are marked so in the"
        " documentation."
    ),
    "manifest": "What went in, and with what; enough to run it again.",
}
