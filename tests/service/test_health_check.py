"""The health check of an API's container says what the API says."""

import socket
import threading

import pytest

from service.health_check import main
from tests.service.web.live import served


def test_an_api_that_answers_is_healthy(capsys: pytest.CaptureFixture[str]) -> None:
    with served() as house:
        assert main({"HOURWRIGHT_PORT": str(house.port)}) == 0
    assert capsys.readouterr().err == ""


def test_where_nobody_listens_it_is_not_healthy(capsys: pytest.CaptureFixture[str]) -> None:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))  # bound, and not listening
        assert main({"HOURWRIGHT_PORT": str(taken.getsockname()[1])}) == 1
    assert capsys.readouterr().err.startswith("no answer: ")


@pytest.mark.parametrize("answer", [b"HTTP/1.1 500 Broken\r\nContent-Length: 0\r\n\r\n", b"no HTTP\r\n\r\n", b""])
def test_another_answer_than_200_is_not_healthy(answer: bytes, capsys: pytest.CaptureFixture[str]) -> None:
    with socket.create_server(("127.0.0.1", 0)) as listening:

        def say() -> None:
            heard, _ = listening.accept()
            with heard:
                heard.recv(1000)
                heard.sendall(answer)

        thread = threading.Thread(target=say)
        thread.start()
        assert main({"HOURWRIGHT_PORT": str(listening.getsockname()[1])}) == 1
        thread.join()
    assert capsys.readouterr().err
