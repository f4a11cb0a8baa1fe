"""What make_samples.py is made of: panoramas, skies, shapes, paints, the harbour, the concourse, files."""
