"""Switches that look like machines and are none: messages, parameters, cursors, coroutines, settings, codes."""

from pathlib import Path

import pytest
from tests.marks import machines_in

OTHERS = {
    "a message's type": """
        enum kind { FEED, STOP, REPORT };
        struct message { enum kind kind; int kg; };
        void feed(int kg); void stop(void); void report(void);
        void handle(const struct message *m)
        {
            switch (m->kind) {
            case FEED: feed(m->kg); break;
            case STOP: stop(); break;
            case REPORT: report(); break;
            default: break;
            }
        }
        void send(struct message *m);
        void ask_for_feed(int kg) { struct message m; m.kind = FEED; m.kg = kg; send(&m); }
        void ask_to_stop(void) { struct message m = { STOP, 0 }; send(&m); }
    """,
    "an event that is handed over": """
        enum event { START, FULL };
        void feed(void); void stop(void);
        void handle(enum event event)
        {
            switch (event) {
            case START: feed(); break;
            case FULL: stop(); break;
            }
        }
    """,
    "a parameter put into another coding": """
        #define OUR_OK 0
        #define OUR_BUSY 1
        #define THEIR_OK 10
        #define THEIR_BUSY 11
        int translate(int code)
        {
            switch (code) {
            case THEIR_OK: code = OUR_OK; break;
            case THEIR_BUSY: code = OUR_BUSY; break;
            default: code = -1; break;
            }
            return code;
        }
    """,
    "a parameter brought into range": """
        int level(int wanted)
        {
            switch (wanted) {
            case 0: wanted = 1; break;
            case 1: break;
            case 2: break;
            default: wanted = 2; break;
            }
            return wanted * 5;
        }
    """,
    "error codes mapped in place": """
        struct result { int code; };
        enum { E_NONE, E_JAM, E_EMPTY };
        enum { SHORE_OK = 100, SHORE_FAULT, SHORE_REFILL };
        void for_the_shore(struct result *r)
        {
            switch (r->code) {
            case E_NONE: r->code = SHORE_OK; break;
            case E_JAM: r->code = SHORE_FAULT; break;
            case E_EMPTY: r->code = SHORE_REFILL; break;
            }
        }
    """,
    "a cursor's character": """
        int words(const char *p)
        {
            int n = 0;
            for (; *p; p++) {
                switch (*p) {
                case ' ': n++; break;
                case '\\n': return n;
                default: break;
                }
            }
            return n;
        }
    """,
    "characters read one by one": """
        int next_char(void);
        int number(void)
        {
            int c = next_char();
            int value = 0;
            for (;;) {
                switch (c) {
                case '0': value *= 10; c = next_char(); break;
                case '1': value = value * 10 + 1; c = next_char(); break;
                case '\\r': c = '\\n'; break;
                case '\\n': return value;
                default: return -1;
                }
            }
        }
    """,
    "an option's letter": """
        int getopt(int argc, char **argv, const char *which);
        int verbose, fast;
        void options(int argc, char **argv)
        {
            int c;
            while ((c = getopt(argc, argv, "vf")) != -1) {
                switch (c) {
                case 'v': verbose = 1; break;
                case 'f': fast = 1; break;
                }
            }
        }
    """,
    "a coroutine": """
        struct thread { unsigned short line; };
        int full(void); int empty(void);
        #define BEGIN(t) switch ((t)->line) { case 0:
        #define WAIT(t, condition) do { (t)->line = __LINE__; case __LINE__: if (!(condition)) return 0; } while (0)
        #define END(t) } (t)->line = 0; return 1
        int feed(struct thread *t)
        {
            BEGIN(t);
            for (;;) {
                WAIT(t, full());
                WAIT(t, empty());
            }
            END(t);
        }
    """,
    "a tag of a setting": """
        enum pellet { SMALL, LARGE };
        struct setting { enum pellet pellet; };
        static struct setting setting = { SMALL };
        int rate(void)
        {
            switch (setting.pellet) {
            case SMALL: return 10;
            case LARGE: return 25;
            }
            return 0;
        }
        void choose(int large) { setting.pellet = large ? LARGE : SMALL; }
    """,
    "the kind of a value": """
        enum tag { WHOLE, PARTS };
        struct value { enum tag tag; int whole; int parts[2]; };
        void make_whole(struct value *v, int n) { v->tag = WHOLE; v->whole = n; }
        void make_parts(struct value *v, int a, int b) { v->tag = PARTS; v->parts[0] = a; v->parts[1] = b; }
        int total(const struct value *v)
        {
            switch (v->tag) {
            case WHOLE: return v->whole;
            case PARTS: return v->parts[0] + v->parts[1];
            default: return 0;
            }
        }
    """,
    "the operation of a received packet, answered in place": """
        #include <stdint.h>
        struct packet { uint8_t operation; uint8_t load; };
        enum { ASK = 1, ANSWER = 2, REFUSE = 3 };
        void send(struct packet *p);
        void received(uint8_t *bytes)
        {
            struct packet *p = (struct packet *)bytes;
            switch (p->operation) {
            case ASK: p->operation = ANSWER; send(p); break;
            case ANSWER: break;
            default: p->operation = REFUSE; send(p); break;
            }
        }
    """,
    "a value computed afresh each time": """
        int keys(void); void up(void); void down(void);
        void poll(void)
        {
            int key = keys() & 3;
            if (key == 3) key = 0;
            switch (key) {
            case 0: break;
            case 1: up(); break;
            case 2: down(); break;
            }
        }
    """,
    "a level that is turned up or down": """
        struct blower { int level; };
        void blow(int level);
        void louder(struct blower *b, int up)
        {
            int level = b->level;
            if (up) {
                switch (level) {
                case 1: level = 4; break;
                case 4: level = 16; break;
                case 16: level = 60; break;
                default: return;
                }
            } else {
                switch (level) {
                case 60: level = 16; break;
                case 16: level = 4; break;
                case 4: level = 1; break;
                default: return;
                }
            }
            b->level = level;
            blow(level);
        }
    """,
    "a counter that picks a channel": """
        static unsigned char channel;
        int a, b, c; int sample(int n);
        void scan(void)
        {
            int value = sample(channel);
            a += value;
            channel = (unsigned char)((channel + 1) % 3);
        }
    """,
}


@pytest.mark.parametrize("kind", OTHERS)
def test_it_is_no_machine(kind: str, tmp_path: Path) -> None:
    assert [machine.variable for machine in machines_in(tmp_path, OTHERS[kind])] == []
