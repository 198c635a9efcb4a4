"""What a run gives: datasets by station, stand and county, tidy tables, and the folder of files that holds them."""

from etflux.results.files import FolderState, default_folder, folder_state, read_folder, read_tables, write_folder
from etflux.results.record import Results, run_identity
from etflux.results.summary import confidence, summarise, water_budget
from etflux.results.tables import SCHEMA_VERSION, columns, table_names

__all__ = [
    "SCHEMA_VERSION",
    "FolderState",
    "Results",
    "columns",
    "confidence",
    "default_folder",
    "folder_state",
    "read_folder",
    "read_tables",
    "run_identity",
    "summarise",
    "table_names",
    "water_budget",
    "write_folder",
]
