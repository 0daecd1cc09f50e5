"""Estimators, one file each behind one registry."""
