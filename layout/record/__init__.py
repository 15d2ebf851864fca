"""The record: its model, reading and atomic writing, and the check of what is sound and what is missing."""
