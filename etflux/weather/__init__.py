"""A station's record: arranged, checked, filled, and given to the counties."""
