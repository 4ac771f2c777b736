"""What is wrong with a record: one file a finding."""
