"""Where the job meets the workflow of a rig: a watched folder, many jobs at once, an acquisition in this process."""
