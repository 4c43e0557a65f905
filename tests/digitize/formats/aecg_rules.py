"""Rules for an annotated ECG, from its schema and its implementation guide.

HL7 v3 Annotated ECG (aECG): message type PORT_MT020001 with data types of release 1, and the
implementation guide of 2005. All of it is written down from memory: the order of elements and how
often each may stand, what an element of each data type holds, what the guide says of sequence sets.
The schema's file itself is not among the registries' packages.
"""

import re
from collections.abc import Iterator
from dataclasses import dataclass
from xml.etree import ElementTree as Xml

V3 = "{urn:hl7-org:v3}"
TYPE = "{http://www.w3.org/2001/XMLSchema-instance}type"
MANY = 10**6
UCUM = {"s", "ms", "us", "mV", "uV", "nV", "/min", "{beats}/min", "bpm", "deg", "1", "mV.s", "uV.s"}
_UID = re.compile(r"[0-2](\.(0|[1-9]\d*))+|[0-9A-Fa-f]{8}(-[0-9A-Fa-f]{4}){3}-[0-9A-Fa-f]{12}")
_DECIMAL = re.compile(r"[-+]?\d+(\.\d+)?([eE][-+]?\d+)?")
_NULL = {"NI", "UNK", "ASKU", "NAV", "NA", "NASK", "MSK", "OTH", "PINF", "NINF", "TRC"}


@dataclass(frozen=True)
class Child:
    """An element that may stand in another, how often, and its data type where it has one."""

    name: str
    least: int = 0
    most: int = 1
    kind: str = ""


# Class by class in the order of the schema's sequences; names lead to the class below.
CLASSES: dict[str, tuple[Child, ...]] = {
    "AnnotatedECG": (
        Child("id", 1, 1, "II"), Child("code", 1, 1, "CE"), Child("text", kind="ED"),
        Child("effectiveTime", 1, 1, "IVL_TS"), Child("confidentialityCode", kind="CE"),
        Child("reasonCode", kind="CE"), Child("componentOf", 1), Child("controlVariable", 0, MANY),
        Child("component", 1, MANY),
    ),
    "AnnotatedECG/componentOf": (Child("timepointEvent", 1),),
    "timepointEvent": (
        Child("code", kind="CE"), Child("effectiveTime", kind="IVL_TS"),
        Child("reasonCode", kind="CE"), Child("performer"), Child("componentOf", 1),
    ),
    "timepointEvent/componentOf": (Child("subjectAssignment", 1),),
    "subjectAssignment": (
        Child("code", kind="CE"), Child("subject", 1), Child("definition"), Child("componentOf", 1),
    ),
    "subjectAssignment/subject": (Child("trialSubject", 1),),
    "trialSubject": (
        Child("id", 1, 1, "II"), Child("code", kind="CE"), Child("subjectDemographicPerson"),
    ),
    "subjectAssignment/componentOf": (Child("clinicalTrial", 1),),
    "clinicalTrial": (
        Child("id", 1, MANY, "II"), Child("title", kind="ED"),
        Child("activityTime", kind="IVL_TS"), Child("author"), Child("location"),
        Child("responsibleParty"),
    ),
    "AnnotatedECG/component": (Child("series", 1),),
    "series": (
        Child("id", 0, 1, "II"), Child("code", 1, 1, "CE"), Child("effectiveTime", 1, 1, "IVL_TS"),
        Child("author"), Child("secondaryPerformer", 0, MANY), Child("support"),
        Child("controlVariable", 0, MANY), Child("component", 1, MANY),
        Child("subjectOf", 0, MANY), Child("derivation", 0, MANY),
    ),
    "series/author": (Child("seriesAuthor", 1),),
    "seriesAuthor": (
        Child("id", kind="II"), Child("manufacturedSeriesDevice", 1),
        Child("manufacturerOrganization"),
    ),
    "manufacturedSeriesDevice": (
        Child("id", kind="II"), Child("code", kind="CE"),
        Child("manufacturerModelName", kind="SC"), Child("softwareName", kind="SC"),
    ),
    "series/component": (Child("sequenceSet", 1),),
    "sequenceSet": (Child("component", 1, MANY),),
    "sequenceSet/component": (Child("sequence", 1),),
    "sequence": (Child("code", 1, 1, "CE"), Child("value", 1, 1, "ANY")),
    "series/subjectOf": (Child("annotationSet", 1),),
    "annotationSet": (
        Child("activityTime", 1, 1, "IVL_TS"), Child("code", kind="CE"), Child("author"),
        Child("methodCode", kind="CE"), Child("support"), Child("component", 1, MANY),
    ),
    "annotationSet/component": (Child("annotation", 1),),
    "annotation": (
        Child("code", 1, 1, "CE"), Child("value", kind="ANY"), Child("support"),
        Child("component", 0, MANY),
    ),
}  # fmt: skip
# Of the data types that hold elements: these, in this order, each a PQ where it is not the digits.
PARTS = {"GLIST_PQ": ("head", "increment"), "SLIST_PQ": ("origin", "scale", "digits")}


def violations(content: bytes) -> list[str]:
    """Return every rule that a document breaks, with the place where it does."""
    root = Xml.fromstring(content)
    if root.tag != f"{V3}AnnotatedECG":
        return [f"the root is {root.tag}"]
    return [*_children(root, "AnnotatedECG", "AnnotatedECG"), *_sequence_sets(root)]


def _children(element: Xml.Element, known: str, path: str) -> Iterator[str]:
    """What is wrong with the children of an element of a class."""
    rules = CLASSES[known]
    names = [_name(child) for child in element]
    order = [rule.name for rule in rules]
    for name in set(names) - set(order):
        yield f"{path}: {name} may not stand there"
    places = [order.index(name) for name in names if name in order]
    if places != sorted(places):
        yield f"{path}: the order is {names}"
    for rule in rules:
        found = [child for child in element if _name(child) == rule.name]
        if not rule.least <= len(found) <= rule.most:
            yield f"{path}: {rule.name} stands {len(found)} times"
        for child in found:
            below = f"{path}/{rule.name}"
            if rule.kind:
                yield from _value(child, rule.kind, below)
            else:
                yield from _children(child, _class(known, rule.name), below)


def _class(known: str, name: str) -> str:
    whole = f"{known.rpartition('/')[2]}/{name}"
    return whole if whole in CLASSES else name


def _value(element: Xml.Element, kind: str, path: str) -> Iterator[str]:
    """What is wrong with a value of a data type."""
    null = element.get("nullFlavor")
    if null is not None:
        if null not in _NULL or len(element) or len(element.attrib) > 1:
            yield f"{path}: a null flavour {null} beside a value, or not known"
        return
    if kind == "ANY":
        kind = element.get(TYPE, "")
        if kind not in (*PARTS, "PQ"):
            yield f"{path}: type {kind!r}"
            return
    if kind == "II" and not _UID.fullmatch(element.get("root", "")):
        yield f"{path}: root {element.get('root')}"
    if kind == "CE" and not (element.get("code") and _UID.fullmatch(element.get("codeSystem", ""))):
        yield f"{path}: a code needs its system"
    if kind in ("ED", "SC") and not (element.text or "").strip():
        yield f"{path}: it is empty"
    if kind == "PQ":
        yield from _quantity(element, path)
    if kind in PARTS:
        if tuple(map(_name, element)) != PARTS[kind]:
            yield f"{path}: {kind} holds {[_name(part) for part in element]}"
        for part in element:
            if _name(part) != "digits":
                yield from _quantity(part, f"{path}/{_name(part)}")


def _quantity(element: Xml.Element, path: str) -> Iterator[str]:
    if not _DECIMAL.fullmatch(element.get("value", "")) or element.get("unit") not in UCUM:
        yield f"{path}: {element.get('value')} {element.get('unit')} is no quantity"


def _sequence_sets(root: Xml.Element) -> Iterator[str]:
    """What the guide asks of a set: one sequence of time, leads once each and of one length."""
    for number, held in enumerate(root.iter(f"{V3}sequenceSet")):
        path = f"sequenceSet {number}"
        codes = [sequence.find(f"{V3}code") for sequence in held.iter(f"{V3}sequence")]
        names = ["" if code is None else code.get("code", "") for code in codes]
        times = [name for name in names if name in ("TIME_RELATIVE", "TIME_ABSOLUTE")]
        leads = [name for name in names if name not in times]
        if len(times) != 1 or names[:1] != times:
            yield f"{path}: one sequence of time stands first, found {names}"
        if not leads or len(set(leads)) < len(leads):
            yield f"{path}: leads {leads}"
        if any(not name.startswith("MDC_ECG_LEAD_") for name in leads):
            yield f"{path}: a lead that the nomenclature does not know: {leads}"
        digits = [(part.text or "").split() for part in held.iter(f"{V3}digits")]
        if len({len(part) for part in digits}) > 1:
            yield f"{path}: leads of different lengths"
        if not all(re.fullmatch(r"-?\d+", digit) for part in digits for digit in part):
            yield f"{path}: digits that are no whole numbers"
        step = held.find(f".//{V3}increment")
        if step is not None and float(step.get("value", "0")) <= 0:
            yield f"{path}: time does not go on"


def _name(element: Xml.Element) -> str:
    return element.tag.removeprefix(V3)
