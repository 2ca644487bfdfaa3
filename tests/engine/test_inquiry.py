"""Questions: answered beside the runs, bounded in time and number, dropped with their asker."""

import asyncio
import json

import pytest

from service.engine.inquiry import Inquiries, answer
from service.engine.records import Ending


@pytest.fixture
def inquiries():
    inquiries = Inquiries("slot_jobs:act", memory=300 * 2**20)
    yield inquiries
    inquiries.close()


def order(do="echo", **more):
    return json.dumps({"do": do, **more}).encode()


def test_a_question_is_answered(inquiries):
    outcome = asyncio.run(inquiries.ask({"id": "q"}, order(say="yes"), 10))
    assert json.loads(answer(outcome)) == {"id": "q", "answer": "yes"}


def test_a_question_that_takes_too_long_has_no_answer(inquiries):
    outcome = asyncio.run(inquiries.ask({}, order("deaf"), 0.3))
    assert outcome.ending is Ending.LIMIT
    assert answer(outcome) is None


def test_many_questions_get_each_its_own_answer_and_the_rest_none(inquiries):
    async def ask_all():
        return await asyncio.gather(*(inquiries.ask({}, order(say=n), 10) for n in range(20)))

    answers = [answer(outcome) for outcome in asyncio.run(ask_all())]
    assert [json.loads(text)["answer"] for text in answers[:16]] == list(range(16))
    assert answers[16:] == [None] * 4


def test_a_question_ends_with_its_asker(inquiries):
    async def leave():
        with pytest.raises(TimeoutError):
            await asyncio.wait_for(inquiries.ask({}, order("deaf"), 60), 0.5)
        return await asyncio.wait_for(inquiries.ask({}, order(say="next"), 10), 10)

    assert asyncio.run(leave()).ending is Ending.ANSWERED


def test_closing_answers_who_waits():
    inquiries = Inquiries("slot_jobs:act", memory=300 * 2**20)

    async def close_in_the_middle():
        asking = asyncio.create_task(inquiries.ask({}, order("deaf"), 60))
        await asyncio.sleep(0.3)
        await asyncio.to_thread(inquiries.close)
        return await asking

    assert asyncio.run(close_in_the_middle()).ending is Ending.CLOSED
