"""What depends on the operating system, kept in one place."""
