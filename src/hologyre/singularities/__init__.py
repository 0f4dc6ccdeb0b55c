"""Phase singularities of one frame: where they are, how sure that is, what they look like."""
