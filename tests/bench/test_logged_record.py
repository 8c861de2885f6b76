"""What logging hands back is what the store holds."""

import numpy as np
from small_laboratory import a_day


def test_the_record_of_a_run_just_logged_equals_the_one_read_back(bench):
    logged = bench.log(a_day())
    read = bench.laboratory.run(logged.heading.id)
    for name in logged.__dataclass_fields__:
        if name != "evaluation":
            assert getattr(logged, name) == getattr(read, name), name
    for name in ("standards", "blanks", "verdict", "quantities"):
        assert getattr(logged.evaluation, name) == getattr(read.evaluation, name), name
    for name in ("values", "covariance", "free", "determined"):
        np.testing.assert_array_equal(
            getattr(logged.evaluation.curve, name), getattr(read.evaluation.curve, name)
        )
