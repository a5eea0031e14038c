"""From stated priors and defaults to Dirichlet parameters.

Signatures, filled in next:

    prior_table(priors, vocabulary, default=1.0) -> PriorTable
    PriorTable.prevalence  ndarray (groups, K)
    PriorTable.response    response[response group][item][class] -> ndarray (categories,)
    PriorTable.prevalence_origin  tuple (groups,) of "default" or the statement's text
    PriorTable.response_origin    [response group][item][class] -> "default" or the text
"""
