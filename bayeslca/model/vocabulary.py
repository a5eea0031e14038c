"""The names that statements may use, and what they stand for.

Signatures, filled in next:

    Vocabulary(items, classes, groups=None, exploratory=False)
    resolve(text, vocabulary) -> Resolved
    read_statements(texts, vocabulary) -> ModelStatements(priors, naming_rules)
    kind_of(statement) -> "prior" | "naming_rule" | "relation" | "quantity"
"""
