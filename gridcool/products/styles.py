"""Styles: OGC Styled Layer Descriptors (SLD 1.0.0), and colours as text for GDAL and its users.

Not every GIS reads a descriptor of a raster; most take a table of values and colours, one a line
with commas between, as ``gdaldem color-relief`` does.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import rasterio
from numpy.typing import NDArray

from gridcool.products.failure import output_errors
from gridcool.products.geotiff import LAYER_FOLDER, gdal_environment
from gridcool.products.legends import combinations, hexadecimal
from gridcool.products.ramps import MISSING, SPANS, Colour, ramp
from gridcool.variables import LayerVariable

FloatArray = NDArray[np.floating]

STYLE_FOLDER = "styles"
SLD = "http://www.opengis.net/sld"
OGC = "http://www.opengis.net/ogc"
STEPS = 9
CLASSES_OF_POLYGONS = 5
OUTLINE: Colour = (34, 34, 34)


def write_styles(product: Path, layers: Mapping[str, LayerVariable]) -> list[Path]:
    """A style for each layer of a product, from its own statistics.

    Parameters
    ----------
    product : Path
        A folder that `write_layers` filled.
    layers : mapping of LayerVariable
        As declared for this product.

    Returns
    -------
    list of Path
        ``styles/<layer>.sld`` and ``styles/<layer>.txt``, in turn.

    Raises
    ------
    OutputError
        If a file cannot be written.
    """
    folder = _folder(product)
    written = []
    for name, layer in layers.items():
        path = folder / f"{name}.sld"
        stops = _stops(product, layer)
        _write(_raster_style(layer, stops), path)
        written += [path, _write_colours(stops, folder / f"{name}.txt")]
    return written


def write_polygon_style(
    product: Path, name: str, column: str, unit: str, values: FloatArray, ramp_name: str
) -> Path:
    """A style of polygons in classes of one attribute, in equal steps of its range.

    Parameters
    ----------
    product : Path
    name : str
        Of the table and the file, such as "regions".
    column, unit : str
    values : array
        Of the attribute; NaN is drawn grey.
    ramp_name : str
    """
    known = np.asarray(values, float)
    known = known[np.isfinite(known)]
    low, high = (float(known.min()), float(known.max())) if known.size else (0.0, 1.0)
    root, rules = _named(name, f"{column} ({unit})")
    edges = np.linspace(low, high, CLASSES_OF_POLYGONS + 1)
    for number, colour in enumerate(ramp(ramp_name).colours(CLASSES_OF_POLYGONS)):
        last = number == CLASSES_OF_POLYGONS - 1
        rule = ET.SubElement(rules, f"{{{SLD}}}Rule")
        label = f"{edges[number]:.4g} to {edges[number + 1]:.4g} {unit}".rstrip()
        ET.SubElement(rule, f"{{{SLD}}}Name").text = label
        # The outermost classes are open, so that no rounding of a limit leaves out the extremes.
        found = ET.SubElement(rule, f"{{{OGC}}}Filter")
        between = found if number == 0 or last else ET.SubElement(found, f"{{{OGC}}}And")
        if number > 0:
            _compare(between, "PropertyIsGreaterThanOrEqualTo", column, edges[number])
        if not last:
            _compare(between, "PropertyIsLessThan", column, edges[number + 1])
        _fill(rule, colour)
    rule = ET.SubElement(rules, f"{{{SLD}}}Rule")
    ET.SubElement(rule, f"{{{SLD}}}Name").text = "nothing eligible"
    null = ET.SubElement(ET.SubElement(rule, f"{{{OGC}}}Filter"), f"{{{OGC}}}PropertyIsNull")
    ET.SubElement(null, f"{{{OGC}}}PropertyName").text = column
    _fill(rule, MISSING)
    path = _folder(product) / f"{name}.sld"
    _write(root, path)
    return path


def _stops(product: Path, layer: LayerVariable) -> list[tuple[float, str, Colour]]:
    """Values with their label and colour."""
    if layer.is_whole:
        counts = {} if layer.classes else _counts(product, layer)
        return [(each.value, each.words, each.colour) for each in combinations(layer, counts)]
    low, high = _span(product, layer)
    unit = "" if layer.units == "1" else f" {layer.units}"
    return [
        (float(value), f"{value:.3g}{unit}", colour)
        for value, colour in zip(
            np.linspace(low, high, STEPS), ramp(layer.ramp).colours(STEPS), strict=True
        )
    ]


def _write_colours(stops: Sequence[tuple[float, str, Colour]], path: Path) -> Path:
    """Value, red, green, blue, opacity and label, one a line, the last for what is missing.

    Commas in labels become semicolons. The missing is spelt as the layers hold it: GDAL's own
    word, "nv", would be read as nought by those who do not know it.
    """
    lines = [
        f"{float(value)!r},{r},{g},{b},255,{' '.join(label.replace(',', ';').split())}"
        for value, label, (r, g, b) in stops
    ]
    with output_errors(path):
        path.write_text("\n".join([*lines, "nan,0,0,0,0,missing"]) + "\n", encoding="utf-8")
    return path


def _raster_style(layer: LayerVariable, stops: Sequence[tuple[float, str, Colour]]) -> ET.Element:
    root, rules = _named(layer.name, layer.long_name)
    rule = ET.SubElement(rules, f"{{{SLD}}}Rule")
    symbolizer = ET.SubElement(rule, f"{{{SLD}}}RasterSymbolizer")
    ET.SubElement(symbolizer, f"{{{SLD}}}Opacity").text = "1"
    channel = ET.SubElement(symbolizer, f"{{{SLD}}}ChannelSelection")
    grey = ET.SubElement(channel, f"{{{SLD}}}GrayChannel")
    ET.SubElement(grey, f"{{{SLD}}}SourceChannelName").text = "1"
    colours = ET.SubElement(symbolizer, f"{{{SLD}}}ColorMap")
    if layer.is_whole:  # not of the standard, but else most servers blend between the entries
        colours.set("type", "values")
    for value, label, colour in stops:
        _entry(colours, value, label, colour)
    return root


def _counts(product: Path, layer: LayerVariable) -> dict[int, int]:
    """How many cells have each value that occurs in a layer of bits, read block by block."""
    total = np.zeros(1 << 16, np.int64)
    with (
        gdal_environment(),
        rasterio.open(product / LAYER_FOLDER / f"{layer.name}.tif") as file,
    ):
        for _, window in file.block_windows(1):
            block = file.read(1, window=window)
            total += np.bincount(block.ravel(), minlength=len(total))
    return {int(value): int(total[value]) for value in np.flatnonzero(total)}


def _span(product: Path, layer: LayerVariable) -> tuple[float, float]:
    """Ends of the ramp: fixed for directions and shares, else the layer's own range."""
    if layer.ramp in SPANS:
        return SPANS[layer.ramp]
    with rasterio.open(product / LAYER_FOLDER / f"{layer.name}.tif") as file:
        tags = [file.tags(band) for band in file.indexes]
    known = [tag for tag in tags if "STATISTICS_MINIMUM" in tag]
    if not known:
        return 0.0, 1.0
    low = min(float(tag["STATISTICS_MINIMUM"]) for tag in known)
    high = max(float(tag["STATISTICS_MAXIMUM"]) for tag in known)
    return (low, high) if high > low else (low - 0.5, low + 0.5)


def _named(name: str, title: str) -> tuple[ET.Element, ET.Element]:
    """The frame of a descriptor, and where its rules go."""
    root = ET.Element(f"{{{SLD}}}StyledLayerDescriptor", {"version": "1.0.0"})
    layer = ET.SubElement(root, f"{{{SLD}}}NamedLayer")
    ET.SubElement(layer, f"{{{SLD}}}Name").text = name
    style = ET.SubElement(layer, f"{{{SLD}}}UserStyle")
    ET.SubElement(style, f"{{{SLD}}}Name").text = name
    ET.SubElement(style, f"{{{SLD}}}Title").text = title
    return root, ET.SubElement(style, f"{{{SLD}}}FeatureTypeStyle")


def _entry(parent: ET.Element, value: float, label: str, colour: Colour) -> None:
    attributes = {"color": hexadecimal(colour), "quantity": repr(float(value)), "label": label}
    ET.SubElement(parent, f"{{{SLD}}}ColorMapEntry", attributes)


def _compare(parent: ET.Element, kind: str, column: str, value: float) -> None:
    element = ET.SubElement(parent, f"{{{OGC}}}{kind}")
    ET.SubElement(element, f"{{{OGC}}}PropertyName").text = column
    ET.SubElement(element, f"{{{OGC}}}Literal").text = repr(float(value))


def _fill(rule: ET.Element, colour: Colour) -> None:
    symbolizer = ET.SubElement(rule, f"{{{SLD}}}PolygonSymbolizer")
    fill = ET.SubElement(symbolizer, f"{{{SLD}}}Fill")
    _parameters(fill, {"fill": hexadecimal(colour), "fill-opacity": "0.85"})
    stroke = ET.SubElement(symbolizer, f"{{{SLD}}}Stroke")
    _parameters(stroke, {"stroke": hexadecimal(OUTLINE), "stroke-width": "0.6"})


def _parameters(parent: ET.Element, values: Mapping[str, str]) -> None:
    for name, text in values.items():
        ET.SubElement(parent, f"{{{SLD}}}CssParameter", {"name": name}).text = text


def _folder(product: Path) -> Path:
    folder = product / STYLE_FOLDER
    with output_errors(folder):
        folder.mkdir(exist_ok=True)
    return folder


def _write(root: ET.Element, path: Path) -> None:
    ET.register_namespace("", SLD)
    ET.register_namespace("ogc", OGC)
    ET.indent(root)
    with output_errors(path):
        ET.ElementTree(root).write(path, encoding="utf-8", xml_declaration=True)
