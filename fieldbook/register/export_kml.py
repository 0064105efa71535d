"""KML for orientation only: placemarks with rounded coordinates, so that nobody takes them for the marks' coordinates.

OGC 07-147r2 (KML 2.2): WGS 84 longitude, latitude; `clampToGround`, because KML heights are above a geoid of its own.
"""

from __future__ import annotations

from collections.abc import Sequence
from xml.etree import ElementTree as ET

from fieldbook.model.visible import visible

from .export_rows import ExportRow

NAMESPACE = "http://www.opengis.net/kml/2.2"
DECIMALS = 6  # a decimetre
WARNING = "For orientation only: rounded to a decimetre, and taken as WGS 84, to about 2 m. The coordinates are in the register."


def as_kml(rows: Sequence[ExportRow]) -> bytes:
    """A KML document, UTF-8."""
    ET.register_namespace("", NAMESPACE)
    root = ET.Element(f"{{{NAMESPACE}}}kml")
    document = _child(root, "Document")
    _child(document, "name", "Control register, for orientation only")
    _child(document, "description", WARNING)
    for row in rows:
        cells = row.cells
        mark = _child(document, "Placemark")
        _child(mark, "name", cells["name"])
        _child(mark, "description", f"{cells['number'] or 'not published'}. {cells['description'] or ''} {WARNING}")
        point = _child(mark, "Point")
        _child(point, "altitudeMode", "clampToGround")
        lon, lat = (round(float(cells[key] or 0), DECIMALS) for key in ("lon_deg", "lat_deg"))
        _child(point, "coordinates", f"{lon:.{DECIMALS}f},{lat:.{DECIMALS}f}")
    text: bytes = ET.tostring(root, encoding="UTF-8", xml_declaration=True)
    return text + b"\n"


def _child(parent: ET.Element, name: str, text: str | None = None) -> ET.Element:
    found = ET.SubElement(parent, f"{{{NAMESPACE}}}{name}")
    if text is not None:
        found.text = visible(text)
    return found
