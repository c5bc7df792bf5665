"""The window: widgets that show a model and send it intentions, no arithmetic."""
