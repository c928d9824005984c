"""From files to knowledge: strict YAML with positions, schemas, frozen records."""
