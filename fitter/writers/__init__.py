"""What the tool writes: tables, the model file, the subcircuit, and the folder they go into."""
