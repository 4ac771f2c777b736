"""Everything that touches files, units and people: readers, the rig file, the job, the sheet and the report."""
