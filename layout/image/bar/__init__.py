"""The divisions of a scale bar, from a rough line beside them to one place each."""
