"""Forms in which a structure leaves bnx: JSON, which is read back to the same classifier, and DOT, which is drawn."""
