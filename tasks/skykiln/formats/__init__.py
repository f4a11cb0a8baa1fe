"""Bytes <-> arrays: one module per container or pixel coding."""
