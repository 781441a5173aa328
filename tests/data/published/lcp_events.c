/* The option negotiation automaton of the Link Control Protocol, RFC 1661 section 4.1: 10 states, 16 events.
 * Form: one function for each event, the state in a struct field. An event that the table says cannot happen in a
 * state has no case there; a cell that stays in its state stores that state. The options that the table's
 * footnotes allow (restart, passive, crossed connection) are not taken. */

extern void irc(void); /* initialise the restart count */
extern void sca(void); /* send Configure-Ack */
extern void scj(void); /* send Code-Reject */
extern void scn(void); /* send Configure-Nak or Configure-Reject */
extern void scr(void); /* send Configure-Request */
extern void ser(void); /* send Echo-Reply */
extern void sta(void); /* send Terminate-Ack */
extern void str(void); /* send Terminate-Request */
extern void tld(void); /* this layer down */
extern void tlf(void); /* this layer finished */
extern void tls(void); /* this layer started */
extern void tlu(void); /* this layer up */
extern void zrc(void); /* zero the restart count */

enum lcp_state {
    LCP_INITIAL,
    LCP_STARTING,
    LCP_CLOSED,
    LCP_STOPPED,
    LCP_CLOSING,
    LCP_STOPPING,
    LCP_REQ_SENT,
    LCP_ACK_RCVD,
    LCP_ACK_SENT,
    LCP_OPENED,
};

struct lcp {
    enum lcp_state state;
};

void lcp_init(struct lcp *f)
{
    f->state = LCP_INITIAL;
}

void lcp_up(struct lcp *f)
{
    switch (f->state) {
    case LCP_INITIAL:
        f->state = LCP_CLOSED;
        break;
    case LCP_STARTING:
        f->state = LCP_REQ_SENT;
        irc();
        scr();
        break;
    default:
        break;
    }
}

void lcp_down(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_INITIAL;
        break;
    case LCP_STOPPED:
        f->state = LCP_STARTING;
        tls();
        break;
    case LCP_CLOSING:
        f->state = LCP_INITIAL;
        break;
    case LCP_STOPPING:
        f->state = LCP_STARTING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_STARTING;
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_STARTING;
        break;
    case LCP_ACK_SENT:
        f->state = LCP_STARTING;
        break;
    case LCP_OPENED:
        f->state = LCP_STARTING;
        tld();
        break;
    default:
        break;
    }
}

void lcp_open(struct lcp *f)
{
    switch (f->state) {
    case LCP_INITIAL:
        f->state = LCP_STARTING;
        tls();
        break;
    case LCP_STARTING:
        f->state = LCP_STARTING;
        break;
    case LCP_CLOSED:
        f->state = LCP_REQ_SENT;
        irc();
        scr();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        break;
    case LCP_CLOSING:
        f->state = LCP_STOPPING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_ACK_RCVD;
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        break;
    case LCP_OPENED:
        f->state = LCP_OPENED;
        break;
    default:
        break;
    }
}

void lcp_close(struct lcp *f)
{
    switch (f->state) {
    case LCP_INITIAL:
        f->state = LCP_INITIAL;
        break;
    case LCP_STARTING:
        f->state = LCP_INITIAL;
        tlf();
        break;
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        break;
    case LCP_STOPPED:
        f->state = LCP_CLOSED;
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_CLOSING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_CLOSING;
        irc();
        str();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_CLOSING;
        irc();
        str();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_CLOSING;
        irc();
        str();
        break;
    case LCP_OPENED:
        f->state = LCP_CLOSING;
        tld();
        irc();
        str();
        break;
    default:
        break;
    }
}

void lcp_to_plus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        str();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        str();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        scr();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        scr();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        scr();
        break;
    default:
        break;
    }
}

void lcp_to_minus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSING:
        f->state = LCP_CLOSED;
        tlf();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_STOPPED;
        tlf();
        break;
    default:
        break;
    }
}

void lcp_rcr_plus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        sta();
        break;
    case LCP_STOPPED:
        f->state = LCP_ACK_SENT;
        irc();
        scr();
        sca();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_ACK_SENT;
        sca();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_OPENED;
        sca();
        tlu();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        sca();
        break;
    case LCP_OPENED:
        f->state = LCP_ACK_SENT;
        tld();
        scr();
        sca();
        break;
    default:
        break;
    }
}

void lcp_rcr_minus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        sta();
        break;
    case LCP_STOPPED:
        f->state = LCP_REQ_SENT;
        irc();
        scr();
        scn();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        scn();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_ACK_RCVD;
        scn();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_REQ_SENT;
        scn();
        break;
    case LCP_OPENED:
        f->state = LCP_REQ_SENT;
        tld();
        scr();
        scn();
        break;
    default:
        break;
    }
}

void lcp_rca(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        sta();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        sta();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_ACK_RCVD;
        irc();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        scr();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_OPENED;
        irc();
        tlu();
        break;
    case LCP_OPENED:
        f->state = LCP_REQ_SENT;
        tld();
        scr();
        break;
    default:
        break;
    }
}

void lcp_rcn(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        sta();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        sta();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        irc();
        scr();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        scr();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        irc();
        scr();
        break;
    case LCP_OPENED:
        f->state = LCP_REQ_SENT;
        tld();
        scr();
        break;
    default:
        break;
    }
}

void lcp_rtr(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        sta();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        sta();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        sta();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        sta();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        sta();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        sta();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_REQ_SENT;
        sta();
        break;
    case LCP_OPENED:
        f->state = LCP_STOPPING;
        tld();
        zrc();
        sta();
        break;
    default:
        break;
    }
}

void lcp_rta(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSED;
        tlf();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        break;
    case LCP_OPENED:
        f->state = LCP_REQ_SENT;
        tld();
        scr();
        break;
    default:
        break;
    }
}

void lcp_ruc(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        scj();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        scj();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        scj();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        scj();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        scj();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_ACK_RCVD;
        scj();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        scj();
        break;
    case LCP_OPENED:
        f->state = LCP_OPENED;
        scj();
        break;
    default:
        break;
    }
}

void lcp_rxj_plus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        break;
    case LCP_OPENED:
        f->state = LCP_OPENED;
        break;
    default:
        break;
    }
}

void lcp_rxj_minus(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        tlf();
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSED;
        tlf();
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_REQ_SENT:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_ACK_SENT:
        f->state = LCP_STOPPED;
        tlf();
        break;
    case LCP_OPENED:
        f->state = LCP_STOPPING;
        tld();
        irc();
        str();
        break;
    default:
        break;
    }
}

void lcp_rxr(struct lcp *f)
{
    switch (f->state) {
    case LCP_CLOSED:
        f->state = LCP_CLOSED;
        break;
    case LCP_STOPPED:
        f->state = LCP_STOPPED;
        break;
    case LCP_CLOSING:
        f->state = LCP_CLOSING;
        break;
    case LCP_STOPPING:
        f->state = LCP_STOPPING;
        break;
    case LCP_REQ_SENT:
        f->state = LCP_REQ_SENT;
        break;
    case LCP_ACK_RCVD:
        f->state = LCP_ACK_RCVD;
        break;
    case LCP_ACK_SENT:
        f->state = LCP_ACK_SENT;
        break;
    case LCP_OPENED:
        f->state = LCP_OPENED;
        ser();
        break;
    default:
        break;
    }
}
