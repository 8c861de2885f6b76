"""The store: append-only tables in SQLite, one transaction and one chain entry per change.

What a day at the bench does not need (check, backup, upgrade) is loaded on first use.
"""

from importlib import import_module
from typing import TYPE_CHECKING

from calib.store.actions import Action, ActionClosure, ActionResult, Verification
from calib.store.base import Base
from calib.store.chain import GENESIS, ChainEntry
from calib.store.current import is_current
from calib.store.curves import Curve, CurveStandard, VerdictRow
from calib.store.instruments import Event, Instrument
from calib.store.lots import Preparation, PreparationCheck, RunSolution, StandardLot
from calib.store.methods import Method
from calib.store.opening import default_store_path, open_store, store_path
from calib.store.originals import Original
from calib.store.people import Person, Setting
from calib.store.quantities import QuantityRow, UncertaintyBasisRow
from calib.store.reviews import IssuedReport, Review
from calib.store.runs import Exclusion, Reading, RuleOverride, Run, RunFacts, RunVoid
from calib.store.session import Store

if TYPE_CHECKING:
    from calib.store.archive_export import Export, export_store
    from calib.store.archive_import import Import, import_store
    from calib.store.backup import Backup, backup_store
    from calib.store.check import StoreCheck, check_store
    from calib.store.findings import StoreFinding
    from calib.store.upgrade import Upgrade, upgrade_store

_LATER = {
    "Export": "calib.store.archive_export",
    "Import": "calib.store.archive_import",
    "export_store": "calib.store.archive_export",
    "import_store": "calib.store.archive_import",
    "Backup": "calib.store.backup",
    "StoreCheck": "calib.store.check",
    "StoreFinding": "calib.store.findings",
    "Upgrade": "calib.store.upgrade",
    "backup_store": "calib.store.backup",
    "check_store": "calib.store.check",
    "upgrade_store": "calib.store.upgrade",
}

__all__ = [
    "GENESIS",
    "Action",
    "ActionClosure",
    "ActionResult",
    "Backup",
    "Base",
    "ChainEntry",
    "Curve",
    "CurveStandard",
    "Event",
    "Exclusion",
    "Export",
    "Import",
    "Instrument",
    "IssuedReport",
    "Method",
    "Original",
    "Person",
    "Preparation",
    "PreparationCheck",
    "QuantityRow",
    "Reading",
    "Review",
    "RuleOverride",
    "Run",
    "RunFacts",
    "RunSolution",
    "RunVoid",
    "Setting",
    "StandardLot",
    "Store",
    "StoreCheck",
    "StoreFinding",
    "UncertaintyBasisRow",
    "Upgrade",
    "VerdictRow",
    "Verification",
    "backup_store",
    "check_store",
    "default_store_path",
    "export_store",
    "import_store",
    "is_current",
    "open_store",
    "store_path",
    "upgrade_store",
]


def __getattr__(name: str) -> object:
    if name not in _LATER:
        raise AttributeError(f"module 'calib.store' has no attribute {name!r}")
    return getattr(import_module(_LATER[name]), name)
