"""Tests of `biasband/margins/`."""
