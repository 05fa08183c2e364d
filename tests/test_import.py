from importlib.metadata import version

import hushrail


def test_package_and_distribution_agree_on_the_version() -> None:
    assert hushrail.__version__ == version("hushrail")
