"""The RF envelope: solved from the flattened circuit around the video run, or extracted from carrier-resolved runs."""
