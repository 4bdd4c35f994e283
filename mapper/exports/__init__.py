"""What a run hands over: maps, tables and the record."""
