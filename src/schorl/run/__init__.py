"""The order of the steps, from a checked job to a written pack."""
