"""The runner: from a checked recipe and rig to a closed run file, with the bench made safe at every ending."""
