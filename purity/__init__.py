"""purity: impurity pickup of high-purity metal, from driving force and rates to a ranked risk table."""

__version__ = "0.1.0"
