"""Planning: when and where a bow or a halo stands, which lens holds it, where it lies on a photograph."""
