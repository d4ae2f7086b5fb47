"""What a person asks for; the only place where storage meets analysis."""
