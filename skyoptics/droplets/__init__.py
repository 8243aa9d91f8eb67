"""Water drops: geometric optics, waves, sizes."""
