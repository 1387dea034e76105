"""Stages load and check: from the files of a study to typed tables, and what is wrong with them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from sms_resource.loaders.tables import LoadedData
from sms_resource.study import Study
from sms_resource.study.files import GridFile, LayerFile, TableFile
from sms_resource.workflow.evidence import metal_columns
from sms_resource.workflow.stage import Context

if TYPE_CHECKING:
    from sms_resource.loaders.boundaries import LayerSource


def table_source(context: Context, table: TableFile) -> Any:
    """What the loaders need to know of one table of the study."""
    from sms_resource.loaders.source import TableSource

    return TableSource(
        path=context.study.resolve(table.file),
        shown_as=table.file,
        sheet=table.sheet,
        layer=table.layer,
        delimiter=table.delimiter,
        decimal=table.decimal,
        encoding=table.encoding,
        columns=dict(table.columns),
        units=dict(table.units),
        vertical=table.vertical,
        constants=dict(table.constants),
        detection_limits=dict(table.detection_limits),
        header_row=table.header_row,
    )


def load(context: Context) -> LoadedData:
    """Read every file of the study."""
    from sms_resource.loaders.drilling import load_drilling
    from sms_resource.loaders.laboratory import load_laboratory
    from sms_resource.loaders.points import load_points
    from sms_resource.loaders.surface_samples import load_dredges, load_surface

    data = context.config.data
    metals = context.config.metals
    extra = tuple(name for name in metals.summarise if name not in metals.estimate)

    def source(table: TableFile | None) -> Any:
        return None if table is None else table_source(context, table)

    drill, found = load_drilling(
        source(data.collars),
        source(data.surveys),
        runs=source(data.runs),
        lithology=source(data.lithology),
        assays=source(data.assays),
        densities=source(data.densities),
        elements=metals.estimate,
        summarise=extra,
    )
    context.findings.extend(found)
    loaded: dict[str, Any] = {"drill": drill}
    for field, table, reader in (
        ("surface", data.surface_samples, lambda item: load_surface(item, metals.estimate, extra)),
        ("dredges", data.dredges, lambda item: load_dredges(item, metals.estimate, extra)),
        ("laboratory", data.laboratory, load_laboratory),
        ("base_points", data.base_points, load_points),
    ):
        if table is not None:
            loaded[field], found = reader(source(table))
            context.findings.extend(found)
    loaded["seafloor"] = _grid(context, data.bathymetry)
    if data.base_grid is not None:
        loaded["base_grid"] = _grid(context, data.base_grid)
    loaded["outline"] = read_layer(context, data.outline, "outline")
    loaded["exclusions"] = read_layer(context, data.exclusions, "exclusions")
    # what later stages read is read here too, so that the command check shows what is wrong with it
    for role, layer in (("chimneys", data.chimneys), ("class_overrides", data.class_overrides)):
        if layer is not None:
            context.findings.extend(_layer(context, layer, role)[1].errors)
    loaded["files"] = context.study.files()
    if data.truth:
        check_truth(context, data.truth)
    context.detail = f"{len(drill.collars)} holes, {len(drill.assays)} assays"
    return LoadedData(**loaded)


def check_truth(context: Context, name: str) -> None:
    """Whether the known truth can be put against the estimate."""
    import json

    try:
        body = json.loads(context.study.resolve(name).read_text(encoding="utf-8"))["body"]
        wanted = ("volume_m3", "dry_tonnes", "wet_tonnes", *metal_columns(context.config))
        missing = [key for key in wanted if not isinstance(body.get(key), int | float)]
    except (ValueError, KeyError, TypeError, AttributeError):
        missing = ["body"]
    if missing:
        context.findings.error(
            "truth-unreadable", f"the truth file has no number for {', '.join(missing)}",
            "Give JSON with a table \"body\", or leave data.truth out: a real deposit has none.", file=name,
        )  # fmt: skip


def load_without_drilling(context: Context) -> LoadedData:
    """Read what a study without holes rests on: surface samples, the seafloor, the outline, zones."""
    from sms_resource.loaders.surface_samples import load_surface

    data, metals = context.config.data, context.config.metals
    extra = tuple(name for name in metals.summarise if name not in metals.estimate)
    surface, found = load_surface(table_source(context, data.surface_samples), metals.estimate, extra)
    context.findings.extend(found)
    made = LoadedData(
        surface=surface, seafloor=_grid(context, data.bathymetry), outline=read_layer(context, data.outline, "outline"),
        exclusions=read_layer(context, data.exclusions, "exclusions"), files=context.study.files(),
    )  # fmt: skip
    context.detail = f"{len(surface)} surface samples, no holes"
    return made


def _grid(context: Context, grid: GridFile) -> Any:
    from sms_resource.loaders.bathymetry import load_grid

    surface, found = load_grid(
        context.study.resolve(grid.file),
        shown_as=grid.file,
        crs=context.config.study.crs,
        declared_crs=grid.crs,
        reproject=grid.reproject,
        variable=grid.variable,
        vertical=grid.vertical,
        band=grid.band,
        uncertainty_band=grid.uncertainty_band,
    )
    context.findings.extend(found)
    return surface


def read_layer(context: Context, layer: LayerFile | None, role: str) -> Any:
    """Read one layer of polygons in its role."""
    if layer is None:
        return None
    frame, found = _layer(context, layer, role)
    context.findings.extend(found)
    return frame


def _layer(context: Context, layer: LayerFile, role: str) -> Any:
    """A layer in its role, and what is wrong with it."""
    from sms_resource.loaders import boundaries

    reader: Any = {
        "outline": boundaries.load_outline,
        "chimneys": boundaries.load_chimneys,
        "exclusions": boundaries.load_exclusions,
        "class_overrides": boundaries.load_overrides,
    }[role]
    return reader(layer_source(context.study, layer, context.config.study.crs))


def layer_source(study: Study, layer: LayerFile, crs: str) -> LayerSource:
    """What the loaders need to know of one layer of the study."""
    from sms_resource.loaders.boundaries import LayerSource

    return LayerSource(
        path=study.resolve(layer.file),
        shown_as=layer.file,
        layer=layer.layer,
        crs=crs,
        declared_crs=layer.crs,
        reproject=layer.reproject,
        columns=dict(layer.columns),
    )


def check(context: Context) -> dict[str, int]:
    """Hold the data against the guards and against each other."""
    from sms_resource.loaders.checks import CheckSettings, check_data

    data: LoadedData = context.done["load"]
    checks = context.config.checks
    settings = CheckSettings(
        crs=context.config.study.crs,
        grid_sigma_m=context.config.seafloor.sigma_m,
        warn_above=dict(checks.warn_above),
        error_above=dict(checks.error_above),
        collar_tolerance_m=checks.collar_tolerance_m,
        far_below_m=checks.far_below_m,
        recovery_limit_pct=checks.recovery_limit_pct,
        twin_distance_m=checks.twin_distance_m,
    )
    context.findings.extend(check_data(data, settings=settings))
    domains = context.config.domains
    if domains.codes:
        from sms_resource.samples.domains import unmapped_codes

        context.findings.extend(unmapped_codes(data.drill.lithology, dict(domains.codes), domains.unlogged))
    counts = context.findings.counts()
    context.detail = f"{counts['error']} errors, {counts['warning']} warnings, {counts['note']} notes"
    return counts
