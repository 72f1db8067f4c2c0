"""A simulated bench and board: physics, truth drawn from the bench file, and the wire."""
