"""The droplet-size study: sweeps over drops, metrics of the bows, colours, datasets, plots."""
