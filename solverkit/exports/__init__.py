"""Files that other programs read: DIMACS CNF, OPB, SMT-LIB 2 and CP-SAT text. Pure text; no solver is loaded."""
