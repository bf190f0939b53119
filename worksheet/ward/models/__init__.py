"""The stored things, one file for each subject."""

from .accounts import Membership, Role, User
from .audit import AuditEvent
from .entries import Draft, Entry, ReviewMark
from .places import Bed, Patient, Stay, Unit
from .sessions import Invitation, LoginSession

__all__ = [
    "AuditEvent",
    "Bed",
    "Draft",
    "Entry",
    "Invitation",
    "LoginSession",
    "Membership",
    "Patient",
    "ReviewMark",
    "Role",
    "Stay",
    "Unit",
    "User",
]
