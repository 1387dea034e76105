"""The whole study file as one typed object."""

from __future__ import annotations

from sms_resource.study import estimate, evidence, files, outcome
from sms_resource.study.base import Section, key
from sms_resource.study.exploration import Exploration


class StudyConfig(Section):
    """Every decision of one estimate."""

    study: evidence.About = key(..., "What the estimate is, and for whom.")
    data: files.DataFiles = key(..., "The data files, each in its role.")
    prospects: evidence.Prospects = key(
        evidence.Prospects(), "Who judged the reasonable prospects, and on what."
    )
    metals: evidence.Metals = key(evidence.Metals(), "Which elements are estimated.")
    checks: evidence.Checks = key(evidence.Checks(), "Guards and tolerances of the checks.")
    assays: evidence.Assays = key(evidence.Assays(), "How values that are not plain numbers are used.")
    position: evidence.Position = key(evidence.Position(), "Collars against the seafloor.")
    domains: evidence.Domains = key(evidence.Domains(), "From logged codes to domains.")
    composites: evidence.Composites = key(evidence.Composites(), "Joining samples to one length.")
    surface_samples: evidence.SurfaceSamples = key(evidence.SurfaceSamples(), "What surface samples may do.")
    top_cuts: evidence.TopCuts = key(evidence.TopCuts(), "Restraint of extreme grades.")
    laboratory: evidence.Laboratory = key(evidence.Laboratory(), "Limits of the control of assays.")
    associations: evidence.Associations = key(evidence.Associations(), "Metal ratios as tracers.")
    density: evidence.Density = key(evidence.Density(), "Dry and wet density.")
    seafloor: estimate.Seafloor = key(estimate.Seafloor(), "The grid before it bounds the body.")
    body: estimate.BodySection = key(estimate.BodySection(), "The sulphide between seafloor and base.")
    chimneys: estimate.Chimneys = key(estimate.Chimneys(), "Chimneys as a domain of their own.")
    blocks: estimate.Blocks = key(estimate.Blocks(), "The block model.")
    variograms: estimate.Variograms = key(estimate.Variograms(), "Continuity of grade.")
    search: estimate.Search = key(estimate.Search(), "Which samples an estimate may see.")
    kriging: estimate.Kriging = key(estimate.Kriging(), "Ordinary kriging and its companions.")
    validation: estimate.Validation = key(estimate.Validation(), "Limits of the checks of the estimate.")
    screens: estimate.Screens = key(estimate.Screens(), "What practice takes from the body.")
    classes: outcome.Classes = key(outcome.Classes(), "Criteria of the proposed classes.")
    exploration: Exploration = key(Exploration(), "The exploration target of a study without drilling.")
    cutoff: outcome.Cutoff = key(outcome.Cutoff(), "Where the table of tonnes is cut.")
    value: outcome.Value = key(outcome.Value(), "Value and costs.")
    scenarios: outcome.Scenarios = key(outcome.Scenarios(), "Overrides that are run beside the study.")
    report: outcome.ReportSection = key(outcome.ReportSection(), "What the report shows.")
    reasons: dict[str, outcome.Reason] = key({}, "Why a key was chosen, by its dotted name.", decision=False)
