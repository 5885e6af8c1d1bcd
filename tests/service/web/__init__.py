"""Tests of the HTTP side, on stores in memory, over real sockets where it matters."""
