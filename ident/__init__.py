"""Identification: from records to a plant with honest intervals. Computes on values, opens no file."""
