"""Audits: candidate circuits judged against a certified reference."""

from trueturn.audit.candidate import Candidate
from trueturn.audit.result import Audit, PointError, Row, Trial
from trueturn.audit.run import audit

__all__ = ["Audit", "Candidate", "PointError", "Row", "Trial", "audit"]
