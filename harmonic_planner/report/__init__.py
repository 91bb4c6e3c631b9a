"""What people look at: figures and terminal tables."""
