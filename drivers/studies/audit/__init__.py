"""Is a stress-update routine right?"""

from drivers.studies.audit.audit import CHECKS, AuditResult, audit
from drivers.studies.audit.subject import CheckResult, Subject, subject_of

__all__ = ["CHECKS", "AuditResult", "CheckResult", "Subject", "audit", "subject_of"]
