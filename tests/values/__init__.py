"""Tests of `biasband/values/`."""
