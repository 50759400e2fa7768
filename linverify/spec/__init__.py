"""From a YAML spec to bound cases."""
