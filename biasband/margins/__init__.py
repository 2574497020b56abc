"""Margins: requirements and standing checks held against what varies, and the verdict."""
