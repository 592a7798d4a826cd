"""Made-up audits, and one of them written to disk once for all tests that only read it."""

from __future__ import annotations

from pathlib import Path

import pytest

from auditor.audit import Audit
from auditor.report import write_audit
from tests.report import fake_audit


@pytest.fixture(scope="session")
def audit() -> Audit:
    return fake_audit.make_audit()


@pytest.fixture(scope="session")
def written(audit: Audit, tmp_path_factory: pytest.TempPathFactory) -> Path:
    out = tmp_path_factory.mktemp("audit")
    write_audit(audit, out, lambda model: f'{{"seed": {model.seed}}}')
    return out
