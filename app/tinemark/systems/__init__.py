"""Systems as data: formulas read safely, files, derivatives, and the evaluators generated from them."""
