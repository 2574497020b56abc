"""Tests of `biasband/signoff/`."""
