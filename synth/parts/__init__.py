"""Parts that can be bought: E-series values, op amps, resistors, capacitors and crystals, read from the catalogs.

`eseries` holds the preferred values, `op_amps` the amplifier figures, `passives` what a planner may use of the stocked
resistors and capacitors, `crystals` the motional figures of resonators.  `locate` finds the catalog files and `catalog`
reads them: every mistake in a file is a `CatalogError` that names file, entry, key, value and bound.
"""
