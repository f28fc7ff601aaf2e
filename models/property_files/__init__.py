"""Reading property files: from TOML text to a `Specification`, every problem reported at its place."""
