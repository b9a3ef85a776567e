"""What Wideberth computes: solids, kinematics, distances, sweeps and proofs. No files, no Qt, no printing."""
