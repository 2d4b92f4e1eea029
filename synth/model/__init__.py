"""What the layers pass on: frozen data, no computing."""
