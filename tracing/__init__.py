"""Water followed through a flow field: pathlines, stagnation points, capture and time zones."""
