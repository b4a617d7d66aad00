"""What to run, when and where: the command line, the direct driver and the Prefect flow. It computes nothing."""
