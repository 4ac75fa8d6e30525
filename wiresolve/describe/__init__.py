"""What the wire is: shapes, sections, materials, the whole problem and its wire file."""
