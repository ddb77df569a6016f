"""Ways of writing a `Note`, one file a format, and the pictures."""
