"""What is learnt at the machine: coupons, and the run's own record."""
