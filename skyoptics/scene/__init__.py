"""What was asked for: scene files, their model and their faults."""
