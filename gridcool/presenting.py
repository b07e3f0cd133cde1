"""What people get of a run: tables, polygons, styles, maps, report, catalogue, manifest."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime
from pathlib import Path
from typing import Any

import rasterio

from gridcool import __version__
from gridcool.config import Settings
from gridcool.grid import Grid
from gridcool.inputs.spec import InputReport
from gridcool.parts import CAUTION, REFERENCES, bounds_text
from gridcool.planned import Decisions, criteria_of, declarations, ranked_by, rules_of
from gridcool.planning.exclusions import ExclusionRule
from gridcool.planning.suitability import Criterion
from gridcool.products.cartography import Surroundings
from gridcool.products.catalog import write_catalog
from gridcool.products.geotiff import LAYER_FOLDER
from gridcool.products.maps import MapPicture, draw_maps
from gridcool.products.report.facts import (
    Assumptions,
    LayerRange,
    Picture,
    ReportFacts,
    Source,
)
from gridcool.products.report.page import write_report
from gridcool.products.styles import write_polygon_style, write_styles
from gridcool.products.tables import write_region_table
from gridcool.products.vectors import in_order, write_polygons
from gridcool.release.fingerprints import Fingerprint
from gridcool.release.manifest import (
    Manifest,
    checksums,
    input_entry,
    package_versions,
    write_manifest,
)
from gridcool.variables import LayerVariable, layer_variables

REGION_TABLE, REGION_SHAPES, ZONE_SHAPES = "regions.csv", "regions.gpkg", "zones.gpkg"
REPORT = "report.html"
USUAL_MAPS = ("rejected_flux", "tilt", "flux_uncertainty")
PLANNING_MAPS = ("suitability", "suitability_class", "exclusion")


@dataclass(frozen=True, eq=False)
class Run:
    """What a run was and found."""

    settings: Settings
    grid: Grid
    reports: Sequence[InputReport]
    prints: Sequence[tuple[str, str, Fingerprint]]  # input, variable, file
    found: Decisions
    release: str
    moment: datetime
    code: str


def present(run: Run, product: Path) -> None:
    """Write everything for people into a folder that already holds the layers."""
    layers = _layers(run.settings, product)
    write_styles(product, layers)
    _write_tables(run, product)
    pictures = draw_maps(product, run.grid, _mapped(run.settings, layers), _around(run))
    write_report(_facts(run, product, layers, pictures), product / REPORT)
    _write_records(run, product, layers)


def _layers(settings: Settings, product: Path) -> dict[str, LayerVariable]:
    """The layers that the product holds, as declared for it."""
    declared = {**layer_variables(), **declarations(settings)}
    held = {path.stem for path in (product / LAYER_FOLDER).glob("*.tif")}
    return {name: layer for name, layer in declared.items() if name in held}


def _mapped(settings: Settings, layers: dict[str, LayerVariable]) -> dict[str, LayerVariable]:
    """The layers to draw: those of the settings, or the usual ones."""
    wanted = settings.maps.layers or [
        *USUAL_MAPS,
        *(name for name in PLANNING_MAPS if name != "exclusion" or settings.exclude),
    ]
    return {name: layers[name] for name in wanted if name in layers}


def _write_tables(run: Run, product: Path) -> None:
    found = run.found
    column, unit, ramp = {
        "suitability": ("suitability_mean", "", "suitability"),
        "rejected_flux": ("rejected_flux_mean", "W m-2", "flux"),
    }[ranked_by(run.settings)]
    if found.table is not None and found.regions is not None:
        write_region_table(found.table, product / REGION_TABLE)
        shapes = in_order(found.regions.names, found.regions.geometries, found.table)
        write_polygons(
            found.table, shapes, product / REGION_SHAPES, "regions", "Regions, best first"
        )
        values = found.table[column].to_numpy(float)
        write_polygon_style(product, "regions", column, unit, values, ramp)
    if found.zones is not None and found.zone_shapes is not None:
        shapes = in_order(found.zone_shapes.names, found.zone_shapes.geometries, found.zones)
        write_polygons(
            found.zones, shapes, product / ZONE_SHAPES, "zones", "Candidate zones, best first"
        )
        values = found.zones[column].to_numpy(float)
        write_polygon_style(product, "zones", column, unit, values, ramp)


def _around(run: Run) -> Surroundings:
    """Outlines of the regions, and the ranks of the first ones."""
    found = run.found
    if found.table is None or found.regions is None:
        return Surroundings(coast=run.settings.maps.coastlines)
    known = dict(zip(found.regions.names, found.regions.geometries, strict=True))
    numbers = []
    for row in found.table[found.table["rank"].notna()].head(10).to_dict("records"):
        point = known[row["region"]].representative_point()
        numbers.append((str(row["rank"]), float(point.x), float(point.y)))
    return Surroundings(found.regions.geometries, numbers, run.settings.maps.coastlines)


def _facts(
    run: Run, product: Path, layers: dict[str, LayerVariable], pictures: Sequence[MapPicture]
) -> ReportFacts:
    settings, found = run.settings, run.found
    shapes: Sequence[Any] = ()
    if found.table is not None and found.regions is not None:
        shapes = in_order(found.regions.names, found.regions.geometries, found.table)
    notes = [warning for report in run.reports for warning in report.warnings]
    notes += list(found.regions.notes) if found.regions is not None else []
    notes += list(found.zone_shapes.notes) if found.zone_shapes is not None else []
    return ReportFacts(
        title=settings.job.name,
        note=settings.job.note,
        created=f"{run.moment:%Y-%m-%d %H:%M} UTC",
        version=__version__,
        grid=bounds_text(run.grid),
        assumptions=_assumptions(settings),
        caution=CAUTION,
        references=REFERENCES,
        settings=json.dumps(settings_record(settings), indent=2, ensure_ascii=False),
        regions=found.table,
        region_shapes=shapes,
        zones=found.zones,
        losses=found.losses,
        sensitivity=found.sensitivity,
        target=found.target,
        pictures=[Picture(each.title, each.path, each.caption) for each in pictures],
        layers=[_range(product, layer) for layer in layers.values() if not layer.is_whole],
        sources=[
            Source(name, each.path.name, variable, each.sha256)
            for name, variable, each in run.prints
        ],
        warnings=notes,
    )


def _assumptions(settings: Settings) -> Assumptions:
    return Assumptions(
        ranked_by=ranked_by(settings),
        top=settings.ranking.top,
        common_share=settings.ranking.common_share,
        correlation_km=settings.ranking.correlation_km,
        ground_cover=settings.panel.ground_cover,
        lifetime_years=settings.panel.lifetime_years,
        reflectance=settings.panel.reflectance * (1 - settings.panel.soiling),
        irradiance=settings.sky.irradiance,
        criteria=tuple(_criterion(each) for each in criteria_of(settings)),
        rules=tuple(_rule(each) for each in rules_of(settings)),
    )


def _criterion(criterion: Criterion) -> str:
    points = ", ".join(f"{worth:g} at {at:g}" for at, worth in criterion.points)
    return f"{criterion.layer.replace('_', ' ')}: worth {points}; weight {criterion.weight:g}"


def _rule(rule: ExclusionRule) -> str:
    limits = []
    if rule.above is not None:
        limits.append(f"above {rule.above:g}")
    if rule.below is not None:
        limits.append(f"below {rule.below:g}")
    if rule.equals is not None:
        limits.append("equal to " + " or ".join(f"{each:g}" for each in rule.equals))
    if rule.missing == "out":
        limits.append("missing")
    return f"{rule.reason}: {rule.layer.replace('_', ' ')} {' or '.join(limits)}"


def _range(product: Path, layer: LayerVariable) -> LayerRange:
    """A layer's range from the statistics in its file."""
    with rasterio.open(product / LAYER_FOLDER / f"{layer.name}.tif") as file:
        tags = [file.tags(band) for band in file.indexes]

    def told(name: str) -> list[float]:
        return [float(each[f"STATISTICS_{name}"]) for each in tags if "STATISTICS_MEAN" in each]

    means = told("MEAN")
    nothing = float("nan")
    return LayerRange(
        layer.name,
        layer.long_name,
        layer.units,
        min(told("MINIMUM"), default=nothing),
        sum(means) / len(means) if means else nothing,
        max(told("MAXIMUM"), default=nothing),
    )


def _write_records(run: Run, product: Path, layers: dict[str, LayerVariable]) -> None:
    """The catalogue's item and the manifest, which tell of all other files."""
    created = f"{run.moment:%Y-%m-%dT%H:%M:%SZ}"
    titles = {f"{LAYER_FOLDER}/{name}.tif": layer.long_name for name, layer in layers.items()}
    write_catalog(
        product,
        run.grid,
        identifier=run.release,
        title=run.settings.job.name,
        created=created,
        description=f"{run.settings.job.note} {CAUTION}".strip(),
        files=checksums(product),
        titles=titles,
    )
    write_manifest(
        product,
        Manifest(
            release=run.release,
            created=created,
            version=__version__,
            code=run.code,
            settings=settings_record(run.settings),
            inputs=[input_entry(*each) for each in run.prints],
            files=checksums(product),
            packages=package_versions(),
        ),
    )


def settings_record(settings: Settings) -> dict[str, Any]:
    """The whole settings as plain values, defaults included."""
    record: dict[str, Any] = settings.model_dump(mode="json")
    return record
