"""The steps from samples to rates: frozen value in, frozen value out."""
