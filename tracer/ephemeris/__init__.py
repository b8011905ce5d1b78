"""Where a spacecraft is, as its source says: in the source's own frame, at any instant that it covers."""
