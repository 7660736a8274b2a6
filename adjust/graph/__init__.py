"""What hangs together: uncoupled parts and closed-form starting values."""
