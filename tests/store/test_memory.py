import asyncio
import threading

import pytest

from service.store.memory import Published, SiteHead, StatusMemory, StoredStatus


def status(room_id="room", position=1, size=1000):
    return StoredStatus(room_id, "site", position, b"x" * size, None, "1", failed=False)


def test_the_memory_is_bounded_by_bytes_and_drops_what_was_not_asked_for_longest():
    memory = StatusMemory(5 * 1600)
    for number in range(5):
        memory.put(status(f"room {number}"))
    assert memory.get("room 0") is not None
    memory.put(status("room 5"))
    assert memory.get("room 1") is None
    assert memory.get("room 0") is not None
    assert memory.bytes_held <= 5 * 1600
    memory.put(status("large", size=10_000))
    assert memory.bytes_held <= 5 * 1600


def test_replacing_and_forgetting_give_the_bytes_back():
    memory = StatusMemory(1_000_000)
    for position in range(10):
        memory.put(status(position=position))
    memory.forget("room")
    memory.forget("room")
    assert memory.bytes_held == 0
    assert memory.get("room") is None


def test_an_older_answer_does_not_replace_a_newer():
    memory = StatusMemory(1_000_000)
    memory.publish([Published((status(position=2),), heads={"site": SiteHead(2, 0)})])
    memory.put(status(position=1))
    memory.publish([Published((status(position=1),), heads={"site": SiteHead(1, 0)})])
    assert memory.get("room").position == 2
    assert memory.known_position("site") == 2


def test_what_was_read_before_a_publication_is_not_kept_after_it():
    """The room may be gone by then, or its newer answer dropped for want of space."""
    memory = StatusMemory(1_000_000)
    reading_since = memory.generation
    memory.publish([Published(forgotten=("room",))])
    memory.put(status(), read_in=reading_since)
    assert memory.get("room") is None
    memory.put(status(), read_in=memory.generation)
    assert memory.get("room") == status()


def test_waiting_ends_when_the_position_is_known_and_not_before():
    memory = StatusMemory(1_000_000)

    async def wait():
        waiting = asyncio.create_task(memory.wait_for("site", 2, 20))
        await asyncio.sleep(0.01)
        await asyncio.to_thread(memory.tell_heads, {"site": SiteHead(1, 0), "b": SiteHead(9, 0)})
        await asyncio.sleep(0.05)
        assert not waiting.done()
        await asyncio.to_thread(memory.tell_heads, {"site": SiteHead(2, 0)})
        assert await waiting
        assert not await memory.wait_for("site", 3, 0.01)
        assert await memory.wait_for("site", 2, 0)

    asyncio.run(wait())
    memory.tell_heads({"site": SiteHead(3, 0)})


def test_a_waiter_that_was_cancelled_is_forgotten():
    memory = StatusMemory(1_000_000)

    async def wait():
        waiting = asyncio.create_task(memory.wait_for("site", 2, 20))
        await asyncio.sleep(0.01)
        waiting.cancel()
        with pytest.raises(asyncio.CancelledError):
            await waiting

    asyncio.run(wait())
    memory.tell_heads({"site": SiteHead(2, 0)})
    assert memory._waiters == set()


def test_threads_do_not_disturb_each_other():
    memory = StatusMemory(40 * 1600)

    def work(first):
        for number in range(300):
            memory.put(status(f"room {(first * 7 + number) % 60}", number))
            memory.get(f"room {number % 60}")
            memory.forget(f"room {(number * 3) % 60}")

    threads = [threading.Thread(target=work, args=(first,)) for first in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    held = [kept for number in range(60) if (kept := memory.get(f"room {number}"))]
    assert memory.bytes_held == sum(len(kept.body) + 600 for kept in held)
    assert memory.bytes_held <= 40 * 1600
