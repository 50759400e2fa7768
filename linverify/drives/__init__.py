"""Input sequences: shapes, random drives, worst drives, the search, pinned files."""
