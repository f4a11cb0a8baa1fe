"""The Luigi tasks of a bake."""
