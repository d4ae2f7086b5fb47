"""Who gets in, what comes with every answer, and what is refused before a view sees it."""
