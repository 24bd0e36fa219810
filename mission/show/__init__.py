"""Results as figures, tables, files and a report."""

from .document import CAUTIONS, SCHEMA_VERSION, ResultDocument, build_document
from .folder import ResultFolder, save_result

__all__ = ["CAUTIONS", "ResultDocument", "ResultFolder", "SCHEMA_VERSION", "build_document", "save_result"]
