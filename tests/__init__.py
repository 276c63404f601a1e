"""Tests of pvcard."""
