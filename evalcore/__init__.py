"""Judging a classifier from a small labelled table by resampling. Knows no screen."""
