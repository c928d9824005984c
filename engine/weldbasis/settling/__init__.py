"""What would settle an open decision, what would relax one, and what stands against another."""
