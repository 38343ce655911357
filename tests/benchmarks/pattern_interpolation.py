"""How well two cuts tell the whole pattern: the table of docs/models.md.

    python tests/benchmarks/pattern_interpolation.py [--front-only]

Patterns that are known in every direction are cut through their peak, put together again from the
cuts by each interpolation, and compared over the sphere. ``--front-only`` withholds the vertical
cut's half behind the antenna.
"""

import argparse

from known_patterns import study_table


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawTextHelpFormatter
    )
    parser.add_argument("--front-only", action="store_true", help="no vertical cut behind")
    for line in study_table(rear_half=not parser.parse_args().front_only):
        print(line)


if __name__ == "__main__":
    main()
