"""One self-contained HTML page: pictures along a quantity under a slider, readings under the pointer, a scattering curve."""
