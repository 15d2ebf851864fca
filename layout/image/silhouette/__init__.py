"""Where a thing ends on a plain ground."""
