"""What people look at: tables, figures, the bench sheet."""
