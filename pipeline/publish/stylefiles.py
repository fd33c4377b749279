"""Looks in open formats: OGC SLD 1.1 with Symbology Encoding, and QML of desktop GIS software."""

from __future__ import annotations

from xml.etree import ElementTree as Xml

from pipeline.publish.columns import Label
from pipeline.publish.styles import Look, Rule

PX_PER_MM = 1 / 0.28
"""OGC Symbology Encoding 1.1 (05-077r4), 11.1.2: a pixel is 0.28 mm."""
Element = Xml.Element


def sld(look: Look) -> str:
    """The look as a StyledLayerDescriptor (OGC 05-078r4)."""
    root = Xml.Element(
        "StyledLayerDescriptor",
        {
            "version": "1.1.0",
            "xmlns": "http://www.opengis.net/sld",
            "xmlns:se": "http://www.opengis.net/se",
            "xmlns:ogc": "http://www.opengis.net/ogc",
        },
    )
    layer = Xml.SubElement(root, "NamedLayer")
    Xml.SubElement(layer, "se:Name").text = look.name
    style = Xml.SubElement(layer, "UserStyle")
    Xml.SubElement(style, "se:Name").text = look.name
    rules = Xml.SubElement(style, "se:FeatureTypeStyle")
    for rule in look.rules:
        element = Xml.SubElement(rules, "se:Rule")
        Xml.SubElement(element, "se:Name").text = rule.label
        about = Xml.SubElement(element, "se:Description")
        Xml.SubElement(about, "se:Title").text = rule.label
        _sld_filter(element, rule)
        _sld_symbol(element, look.shape, rule)
    return Xml.tostring(root, encoding="unicode")


def _sld_filter(parent: Element, rule: Rule) -> None:
    if not rule.column:
        return
    outer = Xml.SubElement(parent, "ogc:Filter")
    if rule.missing:
        null = Xml.SubElement(outer, "ogc:PropertyIsNull")
        Xml.SubElement(null, "ogc:PropertyName").text = rule.column
        return
    if rule.value is not None:
        _sld_compare(outer, "EqualTo", rule.column, rule.value)
        return
    both = Xml.SubElement(outer, "ogc:And")
    if rule.low is not None:
        _sld_compare(both, "GreaterThanOrEqualTo", rule.column, rule.low)
    if rule.high is not None:
        _sld_compare(both, f"LessThan{'OrEqualTo' if rule.top else ''}", rule.column, rule.high)


def _sld_compare(parent: Element, name: str, column: str, value: str | float) -> None:
    compare = Xml.SubElement(parent, f"ogc:PropertyIs{name}")
    Xml.SubElement(compare, "ogc:PropertyName").text = column
    Xml.SubElement(compare, "ogc:Literal").text = _number(value)


def _sld_symbol(parent: Element, shape: str, rule: Rule) -> None:
    width = f"{(rule.size if shape == 'line' else rule.border_size) * PX_PER_MM:.3g}"
    if shape == "line":
        symbol = Xml.SubElement(parent, "se:LineSymbolizer")
        _sld_stroke(symbol, rule.colour, width)
        return
    symbol = Xml.SubElement(parent, f"se:{'Polygon' if shape == 'area' else 'Point'}Symbolizer")
    if shape == "point":
        graphic = Xml.SubElement(symbol, "se:Graphic")
        symbol = Xml.SubElement(graphic, "se:Mark")
        Xml.SubElement(symbol, "se:WellKnownName").text = "square" if rule.square else "circle"
        Xml.SubElement(graphic, "se:Size").text = f"{rule.size * PX_PER_MM:.3g}"
    fill = Xml.SubElement(symbol, "se:Fill")
    Xml.SubElement(fill, "se:SvgParameter", {"name": "fill"}).text = rule.colour
    _sld_stroke(symbol, rule.border, width)


def _sld_stroke(parent: Element, colour: str, width: str) -> None:
    stroke = Xml.SubElement(parent, "se:Stroke")
    Xml.SubElement(stroke, "se:SvgParameter", {"name": "stroke"}).text = colour
    Xml.SubElement(stroke, "se:SvgParameter", {"name": "stroke-width"}).text = width


def qml(look: Look, labels: list[Label]) -> str:
    """The look, and the titles of the columns as aliases, as QML."""
    root = Xml.Element("qgis", {"version": "3.22.0", "styleCategories": "Symbology|Fields"})
    renderer = Xml.SubElement(
        root, "renderer-v2", {"type": "RuleRenderer", "symbollevels": "0", "forceraster": "0"}
    )
    rules = Xml.SubElement(renderer, "rules", {"key": "root"})
    symbols = Xml.SubElement(renderer, "symbols")
    for number, rule in enumerate(look.rules):
        about = {"key": f"rule{number}", "label": rule.label, "symbol": str(number)}
        if rule.column:
            about["filter"] = _expression(rule)
        Xml.SubElement(rules, "rule", about)
        _qml_symbol(symbols, number, look.shape, rule)
    aliases = Xml.SubElement(root, "aliases")
    for index, label in enumerate(labels, start=1):
        about = {"field": label.column, "index": str(index), "name": label.title}
        Xml.SubElement(aliases, "alias", about)
    head = "<!DOCTYPE qgis PUBLIC 'http://mrcc.com/qgis.dtd' 'SYSTEM'>\n"
    return head + Xml.tostring(root, encoding="unicode")


def _expression(rule: Rule) -> str:
    column = f'"{rule.column}"'
    if rule.missing:
        return f"{column} IS NULL"
    if rule.value is not None:
        quoted = isinstance(rule.value, str)
        return f"{column} = '{rule.value}'" if quoted else f"{column} = {_number(rule.value)}"
    parts = []
    if rule.low is not None:
        parts.append(f"{column} >= {_number(rule.low)}")
    if rule.high is not None:
        parts.append(f"{column} {'<=' if rule.top else '<'} {_number(rule.high)}")
    return " AND ".join(parts)


def _qml_symbol(parent: Element, number: int, shape: str, rule: Rule) -> None:
    kinds = {
        "area": ("fill", "SimpleFill"),
        "line": ("line", "SimpleLine"),
        "point": ("marker", "SimpleMarker"),
    }
    kind, drawn = kinds[shape]
    about = {"name": str(number), "type": kind, "alpha": "1", "clip_to_extent": "1"}
    symbol = Xml.SubElement(parent, "symbol", about)
    layer = Xml.SubElement(symbol, "layer", {"class": drawn, "enabled": "1", "pass": "0"})
    colour, border = _rgba(rule.colour), _rgba(rule.border)
    properties = {
        "area": {
            "color": colour,
            "outline_color": border,
            "outline_width": f"{rule.border_size:g}",
            "outline_width_unit": "MM",
            "style": "solid" if not rule.missing else "b_diagonal",
        },
        "line": {"line_color": colour, "line_width": f"{rule.size:g}", "line_width_unit": "MM"},
        "point": {
            "color": colour,
            "name": "square" if rule.square else "circle",
            "outline_color": border,
            "outline_width": f"{rule.border_size:g}",
            "outline_width_unit": "MM",
            "size": f"{rule.size:g}",
            "size_unit": "MM",
        },
    }[shape]
    if shape == "area" and rule.missing:
        properties["color"] = border
    options = Xml.SubElement(layer, "Option", {"type": "Map"})
    for key, value in properties.items():
        Xml.SubElement(options, "Option", {"name": key, "type": "QString", "value": value})
    # Releases before 3.20 read these instead.
    for key, value in properties.items():
        Xml.SubElement(layer, "prop", {"k": key, "v": value})


def _rgba(colour: str) -> str:
    return ",".join(str(int(colour[i : i + 2], 16)) for i in (1, 3, 5)) + ",255"


def _number(value: str | float) -> str:
    return value if isinstance(value, str) else repr(float(value))
