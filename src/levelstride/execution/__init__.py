"""Where work items run: each module hands out a `concurrent.futures.Executor`."""
