"""What integrates. One contract (``base``), one folder an engine."""
