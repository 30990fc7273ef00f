"""What `check` looks for, and how its findings are told."""
