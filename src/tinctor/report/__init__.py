"""Renders responses and records for people; computes nothing."""
