//! Ports, the acknowledged session over them, clock alignment, reconnecting.
