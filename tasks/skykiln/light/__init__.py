"""The numerics: arrays in, arrays out. No files, no Luigi, no config objects."""
