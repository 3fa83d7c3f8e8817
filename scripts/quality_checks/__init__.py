"""Quality checks, one a part."""
