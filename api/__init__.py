"""The HTTP API: JSON under /api/v1/, built on the running daemon."""
