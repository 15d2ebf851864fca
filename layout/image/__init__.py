"""Pictures: headers, decoding, orientation, limits and hash."""
