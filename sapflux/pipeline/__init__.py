"""From a recipe and a site to written results: recipe -> plan -> execute -> outputs."""
