"""A virtual site: known transpiration in, raw logger files out.

The way runs forwards only: weather -> demand of a species -> flow of each stem -> flux density at
a radius -> signal of a probe -> text of a logger and its mess. Each step is a plain function of
arrays and of a parameter object. The demo site (`demo`) is one set of such parameters, the
virtual copy of a site (`copy.write_copy`) one that is drawn about what the site says. Shares only
`physics` and `site` with the pipeline, and turns formulas the pipeline uses by a numerical inverse.
"""
