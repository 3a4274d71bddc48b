"""What a run says: as text, as a JSON document, as a folder of files."""
