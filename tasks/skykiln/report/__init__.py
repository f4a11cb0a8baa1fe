"""Pictures and pages made from numbers and arrays."""
