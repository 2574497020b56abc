"""Tests of `biasband/boards/`."""
