"""What no lens can beat."""
