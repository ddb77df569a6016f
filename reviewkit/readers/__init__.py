"""Ways of reading what a referee holds: tables, scripts, manuscripts."""
