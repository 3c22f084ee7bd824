"""Rows of invented long tables in the columns of the Water Quality Exchange."""

import csv
import io

HEADERS = {
    "org": "OrganizationIdentifier",
    "id": "ActivityIdentifier",
    "type": "ActivityTypeCode",
    "media": "ActivityMediaName",
    "date": "ActivityStartDate",
    "time": "ActivityStartTime/Time",
    "site": "MonitoringLocationIdentifier",
    "depth": "ActivityDepthHeightMeasure/MeasureValue",
    "depth_unit": "ActivityDepthHeightMeasure/MeasureUnitCode",
    "what": "CharacteristicName",
    "fraction": "ResultSampleFractionText",
    "speciation": "MethodSpecificationName",
    "value": "ResultMeasureValue",
    "unit": "ResultMeasure/MeasureUnitCode",
    "condition": "ResultDetectionConditionText",
    "limit": "DetectionQuantitationLimitMeasure/MeasureValue",
    "limit_unit": "DetectionQuantitationLimitMeasure/MeasureUnitCode",
    "status": "ResultStatusIdentifier",
}
USUAL = {"org": "ORG", "id": "A", "type": "Sample-Routine", "media": "Water", "date": "2024-06-01", "status": "Final"}


def result(what, value="", unit="", **more):
    """One row of a long table: a characteristic of sample A, or as `more` says."""
    return {**dict.fromkeys(HEADERS, ""), **USUAL, "what": what, "value": value, "unit": unit, **more}


def as_text(rows, without=()):
    """The rows as a CSV file, some columns left out."""
    stream = io.StringIO()
    names = [name for name in HEADERS if name not in without]
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow([HEADERS[name] for name in names])
    writer.writerows([row[name] for name in names] for row in rows)
    return stream.getvalue()


PH = result("pH", "7.1", "std units")  # so that the sample has something besides what is tried
