"""Reports: terminal, record, assignment, audit."""

from netpart.report.audit import AuditReport, Finding, audit, rules_of_record
from netpart.report.environment import describe_environment, version
from netpart.report.files import write_files
from netpart.report.record import (
    SCHEMA_NAME,
    describe_input,
    dump_json,
    format_assignment,
    load_schema,
    make_record,
)
from netpart.report.survey import show_survey
from netpart.report.terminal import show_audit, show_bounds, show_settings, show_split

__all__ = [
    "SCHEMA_NAME",
    "AuditReport",
    "Finding",
    "audit",
    "describe_environment",
    "describe_input",
    "dump_json",
    "format_assignment",
    "load_schema",
    "make_record",
    "rules_of_record",
    "show_audit",
    "show_bounds",
    "show_settings",
    "show_split",
    "show_survey",
    "version",
    "write_files",
]
