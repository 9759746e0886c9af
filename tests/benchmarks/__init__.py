"""Scripts that measure; none of them is a test."""
