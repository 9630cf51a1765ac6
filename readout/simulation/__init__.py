"""Mirror motion, optics and sensor: frames whose truth is known."""
