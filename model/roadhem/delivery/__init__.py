"""Delivery: pictures and reports that a person can judge at a glance."""
