"""Sources: the sun's disc and spectrum, and what the air takes out of them."""
