"""Standards for exchange: SBML and GraphML, out and in."""

from ruleout.exchange.graphml import read_graphml, write_graphml
from ruleout.exchange.sbml_reading import import_sbml
from ruleout.exchange.sbml_writing import write_sbml

__all__ = ["import_sbml", "read_graphml", "write_graphml", "write_sbml"]
