"""What a user asks for: read, checked, written back, forecast and made ready."""
