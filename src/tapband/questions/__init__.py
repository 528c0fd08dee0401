"""Answers to questions put to a reduced campaign."""
