"""Constitutive laws, one small file each; :mod:`shpb.merge.models.registry` finds them by themselves."""
