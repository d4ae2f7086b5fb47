"""The tables of the registry, as typed models with named constraints."""

from registry.storage.tables.base import Base
from registry.storage.tables.history import Event, FreeText, RegistryEvent
from registry.storage.tables.people import AccessToken, Invitation, Membership, Person, SignedSession
from registry.storage.tables.series import Condition, Factor, Level, LevelAlias, Response, Series
from registry.storage.tables.sharing import (
    ColumnMapping,
    Decision,
    ImportJob,
    PinnedResult,
    ReaderLink,
    ReaderLinkVisits,
)
from registry.storage.tables.studies import (
    Amendment,
    Cell,
    CellLevel,
    Plan,
    Run,
    Study,
    StudyFactor,
    StudyLevel,
    StudyResponse,
)
from registry.storage.tables.trials import Reading, TallyRow, Trial, TrialCondition, TrialNote

__all__ = [
    "AccessToken",
    "Amendment",
    "Base",
    "Cell",
    "CellLevel",
    "ColumnMapping",
    "Condition",
    "Decision",
    "Event",
    "Factor",
    "FreeText",
    "ImportJob",
    "Invitation",
    "Level",
    "LevelAlias",
    "Membership",
    "Person",
    "PinnedResult",
    "Plan",
    "ReaderLink",
    "ReaderLinkVisits",
    "Reading",
    "RegistryEvent",
    "Response",
    "Run",
    "Series",
    "SignedSession",
    "Study",
    "StudyFactor",
    "StudyLevel",
    "StudyResponse",
    "TallyRow",
    "Trial",
    "TrialCondition",
    "TrialNote",
]
