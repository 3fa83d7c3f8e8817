"""Files out: prescriptions for controllers, surfaces, the pack, and the reading back of each."""
