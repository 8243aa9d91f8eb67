"""From spectra to display colour and image files."""
