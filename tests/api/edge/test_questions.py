"""Questions are computed a few at a time; what comes on top of those that wait is refused."""

import asyncio
import threading

import pytest

from service.api.questions import Questions
from service.errors import Busy


def test_so_many_run_so_many_wait_and_one_more_is_refused():
    # Each goes on only once another runs beside it.
    two, lock = threading.Barrier(2, timeout=20), threading.Lock()
    running, most = 0, 0

    def question(number):
        nonlocal running, most
        with lock:
            running += 1
            most = max(most, running)
        two.wait()
        with lock:
            running -= 1
        two.wait()
        return number

    async def asking():
        ask = Questions(at_once=2, waiting=2)
        tasks = [asyncio.create_task(ask(question, number)) for number in range(4)]
        await asyncio.sleep(0)
        with pytest.raises(Busy):
            await ask(question, 4)
        assert await asyncio.gather(*tasks) == [0, 1, 2, 3]
        assert await ask(lambda: 5) == 5

    asyncio.run(asking())
    assert most == 2


def test_a_question_that_fails_gives_its_place_back():
    async def asking():
        ask = Questions(at_once=1, waiting=0)
        for _ in range(3):
            with pytest.raises(ZeroDivisionError):
                await ask(lambda: 1 / 0)
        assert await ask(lambda: 1) == 1

    asyncio.run(asking())
