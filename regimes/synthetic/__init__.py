"""Worlds of known truth: fixes and tracks made by flows whose separation kernel or spectrum is given."""
