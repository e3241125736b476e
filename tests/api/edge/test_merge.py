import copy
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.changes.merge import merge_patch

# RFC 7396, appendix A, "Example Test Cases": original, patch, result.
APPENDIX_A = [
    ('{"a":"b"}', '{"a":"c"}', '{"a":"c"}'),
    ('{"a":"b"}', '{"b":"c"}', '{"a":"b","b":"c"}'),
    ('{"a":"b"}', '{"a":null}', "{}"),
    ('{"a":"b","b":"c"}', '{"a":null}', '{"b":"c"}'),
    ('{"a":["b"]}', '{"a":"c"}', '{"a":"c"}'),
    ('{"a":"c"}', '{"a":["b"]}', '{"a":["b"]}'),
    ('{"a":{"b":"c"}}', '{"a":{"b":"d","c":null}}', '{"a":{"b":"d"}}'),
    ('{"a":[{"b":"c"}]}', '{"a":[1]}', '{"a":[1]}'),
    ('["a","b"]', '["c","d"]', '["c","d"]'),
    ('{"a":"b"}', '["c"]', '["c"]'),
    ('{"a":"foo"}', "null", "null"),
    ('{"a":"foo"}', '"bar"', '"bar"'),
    ('{"e":null}', '{"a":1}', '{"e":null,"a":1}'),
    ("[1,2]", '{"a":"b","c":null}', '{"a":"b"}'),
    ("{}", '{"a":{"bb":{"ccc":null}}}', '{"a":{"bb":{}}}'),
]

VALUES = st.recursive(
    st.none() | st.integers(0, 9) | st.sampled_from("xyz"),
    lambda inner: (
        st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from("abc"), inner, max_size=3)
    ),
    max_leaves=12,
)


@pytest.mark.parametrize(("original", "patch", "result"), APPENDIX_A)
def test_merging_gives_the_table_of_the_standard(original, patch, result):
    assert merge_patch(json.loads(original), json.loads(patch)) == json.loads(result)


@given(VALUES, VALUES)
def test_merging_changes_neither_side_and_twice_is_once(target, patch):
    before = copy.deepcopy((target, patch))
    once = merge_patch(target, patch)
    assert (target, patch) == before
    assert merge_patch(once, patch) == once
