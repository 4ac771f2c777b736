"""Pictures: values in, a matplotlib Figure out."""
