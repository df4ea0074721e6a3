"""What people keep: rows, figures, HTML and PDF."""
