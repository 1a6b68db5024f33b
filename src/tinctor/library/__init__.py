"""Records of pure components, in collections."""

from tinctor.library.check import CheckFinding, check_collection
from tinctor.library.collection import Collection, collections, load_collection
from tinctor.library.record import Record, load_record

__all__ = ["CheckFinding", "Collection", "Record", "check_collection", "collections", "load_collection", "load_record"]
