"""States that a broker keeps of what the site file no longer has."""

from __future__ import annotations

from pathlib import Path

from daemon.outbox import Topics
from daemon.retained import gone, retained_topics
from daemon.store.store import Store
from tests.daemon.broker import Broker, Listener
from tests.daemon.linking import BASE, linked, state
from tests.daemon.shops import SITE, site

TOPICS = Topics(BASE)


def test_a_trap_that_was_taken_out_leaves_the_broker(broker: Broker, tmp_path: Path) -> None:
    tank, riser = f"{BASE}/traps/tank", f"{BASE}/traps/riser"
    with Store.open(tmp_path / "a.db", {}) as store:
        assert gone(store, {tank, riser}) == []
        with (
            Listener(broker.port, f"{BASE}/traps/+") as listener,
            linked(broker.port, store) as link,
        ):
            link.publish_states([state("tank", "1"), state("riser", "2")])
            listener.wait_for_number(2)
        with Listener(broker.port, f"{BASE}/traps/+") as listener:
            listener.wait_for_number(2)
            with linked(broker.port, store) as link:
                link.publish_states(gone(store, {tank}))  # the riser is no more
                heard = listener.wait_for_number(3)
        assert (heard[2].topic, heard[2].payload) == (riser, b"")
        with Listener(broker.port, f"{BASE}/#") as listener:
            listener.wait_for(lambda all_heard: any(each.topic == tank for each in all_heard))
            listener.say(f"{BASE}/last", "x")
            listener.wait_for(lambda all_heard: all_heard[-1].topic == f"{BASE}/last")
            assert riser not in [each.topic for each in listener.heard]


def test_what_is_used_again_is_not_taken_away(tmp_path: Path) -> None:
    with Store.open(tmp_path / "a.db", {}) as store:
        gone(store, {"a", "b"})
        assert [each.topic for each in gone(store, {"a"})] == ["b"]
        assert gone(store, {"a", "b"}) == []
        assert [each.topic for each in gone(store, {"a"})] == ["b"]  # and again after a restart


def test_every_state_of_a_site_is_remembered() -> None:
    found = retained_topics(TOPICS, site(SITE), ["tank-drain-due"])
    assert found == {
        f"{BASE}/{rest}"
        for rest in (
            "service",
            "weekly",
            "traps/tank",
            "traps/riser",
            "traps/bowl",
            "outlets/spray-gun",
            "alarms/tank-drain-due",
        )
    }
