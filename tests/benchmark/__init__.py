"""Benchmarks: run by hand, never as part of the tests."""
