"""Virtual instruments: one forward operator (sampling), and a small module of geometry for each kind of instrument."""
