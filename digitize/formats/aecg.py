"""An HL7 version 3 annotated ECG, NAME.aecg.xml, in steps of 1 µV.

The format has no value for "no sample", but a series may hold many sequence sets, each with its
own time and leads of equal length: every stretch without a gap becomes one, so nothing is filled
in. Measurements that the nomenclature knows are annotations of the series. Subject, trial and date
are not known here and say so (null flavour UNK).

References
----------
HL7 v3 Annotated ECG (aECG), release 1, ANSI/HL7 V3 ECG R1-2004, and its implementation guide
(2005): structure and codes written down from memory of the guide, as are the reference identifiers
of measurements.
"""

import uuid
from collections import defaultdict
from xml.etree import ElementTree as Xml

import numpy as np

from digitize import program_version
from digitize.formats.leads import DERIVED, LeadTable, lead_table
from digitize.formats.measurements import NOTHING, Measurements, rounded
from digitize.tracing import Tracing

V3 = "urn:hl7-org:v3"
_XSI_TYPE = "{http://www.w3.org/2001/XMLSchema-instance}type"
_MDC, _MDC_NAME = "2.16.840.1.113883.6.24", "MDC"
_ACT_CODE = "2.16.840.1.113883.5.4"
_CPT = "2.16.840.1.113883.6.12"
_ROUTINE_ECG = "93000"


def files(tracing: Tracing, stem: str, measurements: Measurements = NOTHING) -> dict[str, bytes]:
    """One annotated ECG as XML.

    Raises
    ------
    CannotExport
        A lead has no code.
    """
    table = lead_table(tracing)
    for name in table.names:
        table.code(name)
    identity = f"{tracing.source.sha256}/{tracing.source.page}"
    root = Xml.Element("AnnotatedECG", {"xmlns": V3})
    _add(root, "id", root=_id(f"document {identity}"))
    _add(root, "code", code=_ROUTINE_ECG, codeSystem=_CPT)
    _add(root, "text").text = " ".join((DERIVED, *measurements.remarks))
    _add(root, "effectiveTime", nullFlavor="UNK")
    event = _add(_add(root, "componentOf"), "timepointEvent")
    assignment = _add(_add(event, "componentOf"), "subjectAssignment")
    subject = _add(_add(assignment, "subject"), "trialSubject")
    _add(subject, "id", nullFlavor="UNK")
    trial = _add(_add(assignment, "componentOf"), "clinicalTrial")
    _add(trial, "id", nullFlavor="UNK")
    series = _add(_add(root, "component"), "series")
    _add(series, "id", root=_id(f"series {identity}"))
    _add(series, "code", code="RHYTHM", codeSystem=_ACT_CODE)
    _add(series, "effectiveTime", nullFlavor="UNK")
    device = _add(_add(_add(series, "author"), "seriesAuthor"), "manufacturedSeriesDevice")
    _add(device, "manufacturerModelName").text = "Derived from a scanned document"
    _add(device, "softwareName").text = f"millivellum {program_version()}"
    for (start, stop), columns in stretches(table).items():
        _add_set(series, table, start, stop, columns)
    _add_measurements(series, measurements)
    Xml.indent(root, " ")
    text = Xml.tostring(root, encoding="utf-8", xml_declaration=True)
    return {f"{stem}.aecg.xml": text}


def stretches(table: LeadTable) -> dict[tuple[int, int], list[int]]:
    """Rows from, to, and the columns that are without a gap exactly there, in order of time."""
    found: dict[tuple[int, int], list[int]] = defaultdict(list)
    for column in range(len(table.names)):
        known = np.concatenate([[False], ~table.missing[:, column], [False]])
        edges = np.flatnonzero(known[1:] != known[:-1]).tolist()
        for start, stop in zip(edges[::2], edges[1::2], strict=True):
            found[start, stop].append(column)
    return dict(sorted(found.items()))


def _add_set(
    series: Xml.Element, table: LeadTable, start: int, stop: int, columns: list[int]
) -> None:
    """One sequence set: the time of a stretch, then its leads."""
    sequences = _add(_add(series, "component"), "sequenceSet")
    sequence = _add(_add(sequences, "component"), "sequence")
    _add(sequence, "code", code="TIME_RELATIVE", codeSystem=_ACT_CODE)
    value = _add(sequence, "value", **{_XSI_TYPE: "GLIST_PQ"})
    _add(value, "head", value=f"{table.start_s + start / table.fs_hz:.3f}", unit="s")
    _add(value, "increment", value=f"{1 / table.fs_hz:g}", unit="s")
    for column in columns:
        sequence = _add(_add(sequences, "component"), "sequence")
        code = f"MDC_ECG_LEAD_{table.names[column].upper()}"
        _add(sequence, "code", code=code, codeSystem=_MDC, codeSystemName=_MDC_NAME)
        value = _add(sequence, "value", **{_XSI_TYPE: "SLIST_PQ"})
        _add(value, "origin", value="0", unit="uV")
        _add(value, "scale", value="1", unit="uV")
        _add(value, "digits").text = " ".join(map(str, table.steps[start:stop, column].tolist()))


def _add_measurements(series: Xml.Element, measurements: Measurements) -> None:
    """Numbers that were measured and have an identifier, as one annotation set."""
    known = [n for n in measurements.numbers if n.value is not None and n.concept.refid]
    if not known:
        return
    annotations = _add(_add(series, "subjectOf"), "annotationSet")
    _add(annotations, "activityTime", nullFlavor="UNK")
    for number in known:
        annotation = _add(_add(annotations, "component"), "annotation")
        refid, unit = number.concept.refid or "", number.concept.unit
        _add(annotation, "code", code=refid, codeSystem=_MDC, codeSystemName=_MDC_NAME)
        value = f"{rounded(number.value or 0.0):g}"
        _add(annotation, "value", **{_XSI_TYPE: "PQ", "value": value, "unit": unit})


def _add(parent: Xml.Element, name: str, **attributes: str) -> Xml.Element:
    return Xml.SubElement(parent, name, attributes)


def _id(name: str) -> str:
    """An identifier of its own for that name, the same each time."""
    return str(uuid.uuid5(uuid.NAMESPACE_OID, name))
