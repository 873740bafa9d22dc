"""Tests mirror the package: tests/<room>/test_<module>.py."""
