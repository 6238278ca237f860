"""The operation table: every operation of the spec language, one row each."""
