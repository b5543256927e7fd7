"""text -> Statements: grammar, syntax tree, printer, complaints."""
