"""General-purpose compressors behind one small protocol; the models made of them are in `models/compressed.py`."""
