"""What makes a Luigi task rerun only when it must: digests, pins, stamps, lots, progress."""
