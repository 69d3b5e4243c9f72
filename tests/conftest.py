"""Put this folder on the import path, so that tests in subfolders find its helpers."""
