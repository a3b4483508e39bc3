"""Lines, stubs and networks between the antenna's terminals and the connector, and their design."""
