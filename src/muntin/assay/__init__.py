"""What is read at the bench: plate reads to recovery, uptake curves to contact time."""
