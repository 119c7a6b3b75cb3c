"""Parts that do not exist but answer in bytes as the real ones do: the test bed and the demo's hardware."""
