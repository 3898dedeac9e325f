"""kickrender: percussion circuits, solved from their netlists, rendered into finished one-shots."""

__version__ = "0.1.0"
