"""What can be shown of a set: attestations, drills, ceremonies, margin, exposure, audit."""
