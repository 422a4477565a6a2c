"""Delivery: pictures and pages that people can judge lines by."""
