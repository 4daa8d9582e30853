"""Chances and gaps once more, on a desk that was filed and then rehearsed: they shall hold there, too.

No item is filed after rehearsal, so that chances are those of the scores from before it.
"""

import desk
import part_chances
import part_gaps
import trial

REHEARSING = "rehearsal_share=1"


def run(corpus, verdicts, options):
    """Files with nothing rehearsed, starts again to rehearse, and asks."""
    if trial.says_rehearsal(options.set):
        verdicts.say("the settings say how much is rehearsed: the other parts are about that")
        return
    with trial.home() as folder:
        with trial.running(options.daemon, folder, options.set) as connection:
            trial.file_items(connection, corpus.train)
            desk.wait_for_worklist(connection)
        with trial.running(options.daemon, folder, [*options.set, REHEARSING]) as connection:
            trial.rehearse(connection)
            part_chances.run(connection, corpus, verdicts, options, "reliability-rehearsed.png")
            part_gaps.run(connection, corpus, verdicts, options)
