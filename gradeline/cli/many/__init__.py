"""Many surveys at once: in turn, in worker processes or on a cluster, told in the order given."""
