"""The application: plans, the pipeline that moves, captures, checks and stores, the daemon and its clients."""
