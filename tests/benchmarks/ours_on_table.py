"""The same comparison with bayeslca, as a whole process.

python ours_on_table.py TABLE.csv 1 2 3 4 5 6
"""

import sys

import bayeslca as lca

if __name__ == "__main__":
    raters = [f"rater_{letter}" for letter in "abcdefg"]
    responses = lca.Responses.read(sys.argv[1], items=raters, counts="count")
    comparison = lca.compare_class_counts(
        responses, [int(k) for k in sys.argv[2:]], seed=7, progress=False
    )
    print(comparison.table.to_string())
