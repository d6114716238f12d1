"""Step "site log": what is new in the site log file is taken over, what is gone from it marked as withdrawn."""

from __future__ import annotations

from rhovane.model import SettingsError
from rhovane.pipeline.context import Night
from rhovane.settings import load_site_log
from rhovane.store import SITE_LOG_FILE

STEP = "site log"


def take_over_site_log(night: Night) -> str:
    """Bring the store's site log in step with the file; a file with mistakes is left for the next night."""
    settings, store = night.settings, night.store
    path = settings.site_log_path
    standing = [s for s in store.site_log() if s.stands]
    if path is None:
        return f"no file named, {len(standing)} entries" if standing else "no file named"
    try:
        written = load_site_log(path, settings.series_by_key(), settings.network.standard_offset)
    except SettingsError as error:
        night.failed(STEP, str(path), " ".join(str(error).split()))
        return f"the file was not taken over, {len(standing)} entries as before"
    known = {s.entry: s for s in standing if s.who == SITE_LOG_FILE}
    new = [entry for entry in written if entry not in known]
    gone = [stored for entry, stored in known.items() if entry not in set(written)]
    acts_from = store.next_judged_day() if new or gone else None
    if new:
        store.add_to_site_log(new, who=SITE_LOG_FILE, now=night.now, acts_from=acts_from)
    for stored in gone:
        store.withdraw_from_site_log(stored.number, now=night.now, from_day=acts_from)
    return f"{len(standing) + len(new) - len(gone)} entries, {len(new)} new, {len(gone)} withdrawn"
