"""What everybody may import: plants, models, drives, cases, verdicts, errors."""
