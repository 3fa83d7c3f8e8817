"""Files in: boundaries, laboratory tables, layers; recognised, converted, checked."""
