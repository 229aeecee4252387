"""The register: plants, tags, transmitters, types and heads, fittings, ranges, flags, people, audit."""

from register.models.audit import AuditEntry
from register.models.flag import Flag
from register.models.people import Membership, Role, User
from register.models.plant import Area, Plant
from register.models.tag import Criticality, Measurand, Range, RootExtraction, Tag
from register.models.transmitter import Fitting, Intervention, Transmitter
from register.models.typed import Frozen, ReferenceKind, Typed, TypedQuantities
from register.models.types import Maker, MeasuringHead, TransmitterType

__all__ = [
    "Area",
    "AuditEntry",
    "Criticality",
    "Fitting",
    "Flag",
    "Frozen",
    "Intervention",
    "Maker",
    "Measurand",
    "MeasuringHead",
    "Membership",
    "Plant",
    "Range",
    "ReferenceKind",
    "Role",
    "RootExtraction",
    "Tag",
    "Transmitter",
    "TransmitterType",
    "Typed",
    "TypedQuantities",
    "User",
]
