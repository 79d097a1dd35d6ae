"""The way to instruments: channels that carry bytes, and links that keep question and answer together."""
