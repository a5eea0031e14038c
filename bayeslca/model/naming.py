"""Naming rules: which class of a draw gets which name.

Signatures, filled in next:

    check_naming_rules(rules, class_names) -> None      conflicting rules -> StatementError
    apply_naming_rules(response_probability, prevalence, rules, item_start) -> permutation (S, K)
        permutation[s, k] = old position that becomes class k
    classes_named(rules, n_classes) -> frozenset[int]
"""
