"""What people see: pages, figures, tables."""
