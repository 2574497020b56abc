"""Tests of `biasband/variation/`."""
