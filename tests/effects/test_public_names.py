from treering import effects


def test_public_names_are_sorted_and_exist():
    assert list(effects.__all__) == sorted(effects.__all__)
    assert all(hasattr(effects, name) for name in effects.__all__)
