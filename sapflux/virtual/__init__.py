"""A virtual site: known transpiration in, raw logger files out.

The way runs forwards only: weather -> demand of a species -> flow of each stem -> flux density at
a radius -> signal of a probe -> text of a logger and its mess. Each step is a plain function of
arrays and of a parameter object; the demo site is one set of such parameters. Shares only
`physics` with the pipeline, and turns formulas the pipeline uses by a numerical inverse.
"""
