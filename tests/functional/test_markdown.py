"""``rulecheck check --as markdown``: what stands under a merge request."""

import re
from textwrap import dedent

from rulecheck.findings import finding_id

ONLY = ("--only", "divider-ratio", "--on", "2026-03-01", "--as", "markdown")
ID = finding_id("divider-ratio", ["R1", "R2"], ["VOUT"], "")


def test_a_design_with_a_finding(run):
    """Summary, figures, conditions, place, remedies, and what the proven one changes."""
    status, out, err = run("check", "divider.toml", *ONLY)
    assert (status, err) == (1, "")
    head = out.replace("\u00a0", " ").partition("\n_A design aid, not an approval")[0]
    # a blank line of the difference has blanks before it
    assert re.sub(r"(?m)^ +$", "", head) == dedent(f"""\
        ## Design review by rulecheck

        **1 design: 1 major, 0 minor, 0 observations. As of 2026-03-01.**

        | design | revision | outcome | major | minor | observation | conceded |
        | --- | --- | --- | --- | --- | --- | --- |
        | `divider.toml` | A | findings | 1 | 0 | 0 | 0 |

        ### `divider.toml` · Divider


        #### major · divider-ratio · R1, R2

        R1 and R2 leave 25% of VIN

        Effect: the noise of what follows grows as the signal falls

        | figure | found | sound is |
        | --- | --- | --- |
        | ratio | 25 % (typical) | at least 50 % |
        | output | 250 mV (at limits) |  |
        | unknown | no figure (typical) |  |

        - when: supply absent
        - worst at: VIN 1 V, ambient 25 degC
        - at `divider.toml:12:1`, id `{ID}`
        - mend a: Make R1 as large as R2 **(proven)**

          <details><summary>the change</summary>

          ```diff
          --- divider.toml
          +++ divider.toml
          @@ -11,7 +11,7 @@

           [parts.R1]
           kind = "resistor"
          -value = "3 kohm"   # from the drawer
          +value = "1 kohm"   # from the drawer
           pins = ["VIN", "VOUT"]

           [parts.R2]
          ```

          </details>

        - mend b: Make R1 a little smaller **(tried, not proven)**
        - mend c: Ask for a larger signal **(by hand)**
        """)


def test_it_goes_whole_into_a_file(run, folder):
    """For the program that posts it; stdout stays empty."""
    _, shown, _ = run("check", "divider.toml", *ONLY)
    status, out, _ = run("check", "divider.toml", *ONLY, "--write", "review.md")
    assert (status, out) == (1, "")
    assert (folder / "review.md").read_text(encoding="utf-8") == shown
