"""Path sets that a regulation names."""
