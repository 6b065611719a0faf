"""Pictures of a solved flowsheet, by matplotlib, which the extra `pictures` brings."""
