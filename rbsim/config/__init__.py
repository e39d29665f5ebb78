"""What was asked for: schema, rules across fields, loading, overrides, writing."""
