"""What could fake this result? One threat a module, each sized on the data at hand."""

from regimes.audit.record import THREATS, Finding
from regimes.audit.run import audit
from regimes.audit.subject import Subject, subject_of

__all__ = ["THREATS", "Finding", "Subject", "audit", "subject_of"]
