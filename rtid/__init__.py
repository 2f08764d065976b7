"""rtid: watches a control loop's plant, says when it has left its baseline, and gives the model to retune from."""

__version__ = "0.1.0"
