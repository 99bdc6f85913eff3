"""Reading and writing of disturbance records; knows nothing of faults."""
