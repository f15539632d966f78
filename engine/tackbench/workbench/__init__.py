"""The bench: from meter readings to models of one's own parts, and a stage file to start from."""
