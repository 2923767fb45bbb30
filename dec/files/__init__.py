"""Bytes to Dataset and back: tables, meshes, and files that appear whole or not at all."""

from dec.files.read import read
from dec.files.tables_out import csv_bytes
from dec.files.vtu import vtu_bytes, vtu_notes
from dec.files.writing import write_atomically

__all__ = ["csv_bytes", "read", "vtu_bytes", "vtu_notes", "write_atomically"]
