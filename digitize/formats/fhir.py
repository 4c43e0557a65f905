"""An HL7 FHIR R5 Observation, NAME.fhir.json: one component of sampled data per lead.

Samples are whole steps of 1 µV; "E" stands where nothing was printed or read. Measurements are
further components: a quantity with its uncertainty, or the reason why it is absent; findings are
words. There is no subject and no date: nothing of the page's header is read. Status is preliminary,
for a person has to look.

References
----------
HL7 FHIR R5 (hl7.org/fhir/R5), Observation and SampledData; codes of ISO/IEEE 11073-10101 under
urn:iso:std:iso:11073:10101; units of UCUM; the extensions for uncertainty and the codes of
data-absent-reason from memory.
"""

import json
from typing import Any

from digitize.formats.leads import DERIVED, NO_SAMPLE, LeadTable, lead_table
from digitize.formats.measurements import NOTHING, Judged, Measurements, Number, rounded
from digitize.tracing import Tracing

MDC = "urn:iso:std:iso:11073:10101"
UCUM = "http://unitsofmeasure.org"
LOINC = "http://loinc.org"
ABSENT = "http://terminology.hl7.org/CodeSystem/data-absent-reason"
UNCERTAINTY = "http://hl7.org/fhir/StructureDefinition/iso21090-uncertainty"
UNCERTAINTY_TYPE = "http://hl7.org/fhir/StructureDefinition/iso21090-uncertaintyType"
# MDC_ECG_ELEC_POTL: partition and code as one number, to which the code of a lead is added
_ELECTRIC_POTENTIAL = 2 * 65536 + 256


def files(tracing: Tracing, stem: str, measurements: Measurements = NOTHING) -> dict[str, bytes]:
    """One Observation as JSON.

    Raises
    ------
    CannotExport
        A lead has no code.
    """
    table = lead_table(tracing)
    observation = {
        "resourceType": "Observation",
        "status": "preliminary",
        "category": [
            {
                "coding": [
                    {
                        "system": "http://terminology.hl7.org/CodeSystem/observation-category",
                        "code": "procedure",
                    }
                ]
            }
        ],
        "code": _concept(_ELECTRIC_POTENTIAL, "MDC_ECG_ELEC_POTL", "Electrocardiogram"),
        "method": {"text": "Derived from a scanned document"},
        "note": [{"text": text} for text in (DERIVED, *measurements.remarks, _raster(table))],
        "component": [
            *(_component(table, column) for column in range(len(table.names))),
            *(_measured(number) for number in measurements.numbers),
            *(_judged(finding) for finding in measurements.findings),
        ],
    }
    text = json.dumps(observation, indent=1, ensure_ascii=True)
    return {f"{stem}.fhir.json": text.encode("ascii")}


def _component(table: LeadTable, column: int) -> dict[str, Any]:
    name = table.names[column]
    steps = table.steps[:, column].tolist()
    return {
        "code": _concept(
            _ELECTRIC_POTENTIAL + table.code(name),
            f"MDC_ECG_ELEC_POTL_{name.upper()}",
            f"Lead {name}",
        ),
        "valueSampledData": {
            "origin": {"value": 0, "unit": "uV", "system": UCUM, "code": "uV"},
            "interval": 1000 / table.fs_hz,
            "intervalUnit": "ms",
            "factor": 1,
            "dimensions": 1,
            "data": " ".join("E" if step == NO_SAMPLE else str(step) for step in steps),
        },
    }


def _measured(number: Number) -> dict[str, Any]:
    """A number with its standard error, or why there is none."""
    concept = number.concept
    coding = []
    if concept.loinc is not None:
        coding.append({"system": LOINC, "code": concept.loinc})
    if concept.mdc is not None:
        coding.append({"system": MDC, "code": str(2 * 65536 + concept.mdc)})
    code = {**({"coding": coding} if coding else {}), "text": concept.words}
    if number.value is None:
        absent = {"coding": [{"system": ABSENT, "code": "unknown"}]}
        return {"code": code, "dataAbsentReason": {**absent, "text": number.reason or "unknown"}}
    quantity: dict[str, Any] = {
        "value": rounded(number.value),
        "unit": concept.unit,
        "system": UCUM,
        "code": concept.unit,
    }
    if number.se is not None:
        quantity["extension"] = [
            {"url": UNCERTAINTY, "valueDecimal": rounded(number.se)},
            {"url": UNCERTAINTY_TYPE, "valueCode": "N"},  # a normal distribution's deviation
        ]
    return {"code": code, "valueQuantity": quantity}


def _judged(finding: Judged) -> dict[str, Any]:
    """A published definition, and what became of it in words: no code makes a diagnosis of it."""
    return {
        "code": {"text": f"Criteria of: {finding.definition} ({finding.source})"},
        "valueCodeableConcept": {"text": finding.result},
    }


def _concept(code: int, display: str, text: str) -> dict[str, Any]:
    return {"coding": [{"system": MDC, "code": str(code), "display": display}], "text": text}


def _raster(table: LeadTable) -> str:
    return (
        f"All leads share one raster that begins {table.start_s:.3f} s after the beginning of the "
        "printed recording; E: nothing was printed or could be read there."
    )
