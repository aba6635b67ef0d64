"""Systems of laws."""
