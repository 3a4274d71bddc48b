"""The circuit as SPICE text: part files put together, decks, and ngspice's flattened listing read back."""
