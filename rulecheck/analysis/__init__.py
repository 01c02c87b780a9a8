"""The numbers: conditions, operating points, stability, transfer, faults."""
