"""The bundled designs, installed with the package."""
