"""What is measured and known: frozen records without I/O."""
