"""The report: pages, tables and pictures of an audit, and the files they are kept in."""

from auditor.report.as_json import audit_json, audit_object
from auditor.report.write import write_audit

__all__ = ["audit_json", "audit_object", "write_audit"]
