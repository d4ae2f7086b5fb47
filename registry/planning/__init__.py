"""Planning the next study: precision, power, order."""
