"""The builder's desk: sums about a stage, all from its closed form, never from its sound."""
