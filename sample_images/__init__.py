"""Invented fragments: photographs, records, truths, and the program that rendered them."""
