"""Where the control surface cuts the mesh."""
