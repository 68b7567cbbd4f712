"""A simulated rig: its physics, and the front panels of its instruments."""
