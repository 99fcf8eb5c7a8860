"""Many scenarios as one: a study file, a store that survives interruption, and the comparison of its cases.

Data flows one way: `reading` (with `variations`, `sampling`, `placing`, `preparing`) makes a `Study`; `planning`
cuts it into chunks; an engine of `engines` has them computed by `solving`, which writes with `shards`; `store`
knows what is finished; `running` holds these together; `results`, `ranking` and `comparing` read what came of it.
"""

from __future__ import annotations

from gibbsmin.study.model import Study
from gibbsmin.study.reading import load_study
from gibbsmin.study.results import StudyResults, open_study
from gibbsmin.study.running import StudyRun, run_study

__all__ = ["Study", "StudyResults", "StudyRun", "load_study", "open_study", "run_study"]
