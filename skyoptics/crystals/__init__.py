"""Ice crystals: shapes, orientations, tracing."""
