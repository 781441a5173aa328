/* The option negotiation automaton of the Link Control Protocol, RFC 1661 section 4.1: 10 states, 16 events.
 * Form: one function, a switch over the event inside a switch over the state, which is a file-static integer with
 * #define constants. An event that the table says cannot happen in a state has no case there; a cell that stays in
 * its state stores that state. The options that the table's footnotes allow (restart, passive, crossed connection)
 * are not taken. */
#include <stdint.h>

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

#define LCP_INITIAL 0u
#define LCP_STARTING 1u
#define LCP_CLOSED 2u
#define LCP_STOPPED 3u
#define LCP_CLOSING 4u
#define LCP_STOPPING 5u
#define LCP_REQ_SENT 6u
#define LCP_ACK_RCVD 7u
#define LCP_ACK_SENT 8u
#define LCP_OPENED 9u

enum lcp_event {
    EV_UP,
    EV_DOWN,
    EV_OPEN,
    EV_CLOSE,
    EV_TO_PLUS,
    EV_TO_MINUS,
    EV_RCR_PLUS,
    EV_RCR_MINUS,
    EV_RCA,
    EV_RCN,
    EV_RTR,
    EV_RTA,
    EV_RUC,
    EV_RXJ_PLUS,
    EV_RXJ_MINUS,
    EV_RXR,
};

static uint8_t state = LCP_INITIAL;

void lcp_event(enum lcp_event ev)
{
    switch (state) {
    case LCP_INITIAL:
        switch (ev) {
        case EV_UP:
            state = LCP_CLOSED;
            break;
        case EV_OPEN:
            state = LCP_STARTING;
            tls();
            break;
        case EV_CLOSE:
            state = LCP_INITIAL;
            break;
        default:
            break;
        }
        break;
    case LCP_STARTING:
        switch (ev) {
        case EV_UP:
            state = LCP_REQ_SENT;
            irc();
            scr();
            break;
        case EV_OPEN:
            state = LCP_STARTING;
            break;
        case EV_CLOSE:
            state = LCP_INITIAL;
            tlf();
            break;
        default:
            break;
        }
        break;
    case LCP_CLOSED:
        switch (ev) {
        case EV_DOWN:
            state = LCP_INITIAL;
            break;
        case EV_OPEN:
            state = LCP_REQ_SENT;
            irc();
            scr();
            break;
        case EV_CLOSE:
            state = LCP_CLOSED;
            break;
        case EV_RCR_PLUS:
            state = LCP_CLOSED;
            sta();
            break;
        case EV_RCR_MINUS:
            state = LCP_CLOSED;
            sta();
            break;
        case EV_RCA:
            state = LCP_CLOSED;
            sta();
            break;
        case EV_RCN:
            state = LCP_CLOSED;
            sta();
            break;
        case EV_RTR:
            state = LCP_CLOSED;
            sta();
            break;
        case EV_RTA:
            state = LCP_CLOSED;
            break;
        case EV_RUC:
            state = LCP_CLOSED;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_CLOSED;
            break;
        case EV_RXJ_MINUS:
            state = LCP_CLOSED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_CLOSED;
            break;
        default:
            break;
        }
        break;
    case LCP_STOPPED:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            tls();
            break;
        case EV_OPEN:
            state = LCP_STOPPED;
            break;
        case EV_CLOSE:
            state = LCP_CLOSED;
            break;
        case EV_RCR_PLUS:
            state = LCP_ACK_SENT;
            irc();
            scr();
            sca();
            break;
        case EV_RCR_MINUS:
            state = LCP_REQ_SENT;
            irc();
            scr();
            scn();
            break;
        case EV_RCA:
            state = LCP_STOPPED;
            sta();
            break;
        case EV_RCN:
            state = LCP_STOPPED;
            sta();
            break;
        case EV_RTR:
            state = LCP_STOPPED;
            sta();
            break;
        case EV_RTA:
            state = LCP_STOPPED;
            break;
        case EV_RUC:
            state = LCP_STOPPED;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_STOPPED;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_STOPPED;
            break;
        default:
            break;
        }
        break;
    case LCP_CLOSING:
        switch (ev) {
        case EV_DOWN:
            state = LCP_INITIAL;
            break;
        case EV_OPEN:
            state = LCP_STOPPING;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            break;
        case EV_TO_PLUS:
            state = LCP_CLOSING;
            str();
            break;
        case EV_TO_MINUS:
            state = LCP_CLOSED;
            tlf();
            break;
        case EV_RCR_PLUS:
            state = LCP_CLOSING;
            break;
        case EV_RCR_MINUS:
            state = LCP_CLOSING;
            break;
        case EV_RCA:
            state = LCP_CLOSING;
            break;
        case EV_RCN:
            state = LCP_CLOSING;
            break;
        case EV_RTR:
            state = LCP_CLOSING;
            sta();
            break;
        case EV_RTA:
            state = LCP_CLOSED;
            tlf();
            break;
        case EV_RUC:
            state = LCP_CLOSING;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_CLOSING;
            break;
        case EV_RXJ_MINUS:
            state = LCP_CLOSED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_CLOSING;
            break;
        default:
            break;
        }
        break;
    case LCP_STOPPING:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            break;
        case EV_OPEN:
            state = LCP_STOPPING;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            break;
        case EV_TO_PLUS:
            state = LCP_STOPPING;
            str();
            break;
        case EV_TO_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RCR_PLUS:
            state = LCP_STOPPING;
            break;
        case EV_RCR_MINUS:
            state = LCP_STOPPING;
            break;
        case EV_RCA:
            state = LCP_STOPPING;
            break;
        case EV_RCN:
            state = LCP_STOPPING;
            break;
        case EV_RTR:
            state = LCP_STOPPING;
            sta();
            break;
        case EV_RTA:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RUC:
            state = LCP_STOPPING;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_STOPPING;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_STOPPING;
            break;
        default:
            break;
        }
        break;
    case LCP_REQ_SENT:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            break;
        case EV_OPEN:
            state = LCP_REQ_SENT;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            irc();
            str();
            break;
        case EV_TO_PLUS:
            state = LCP_REQ_SENT;
            scr();
            break;
        case EV_TO_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RCR_PLUS:
            state = LCP_ACK_SENT;
            sca();
            break;
        case EV_RCR_MINUS:
            state = LCP_REQ_SENT;
            scn();
            break;
        case EV_RCA:
            state = LCP_ACK_RCVD;
            irc();
            break;
        case EV_RCN:
            state = LCP_REQ_SENT;
            irc();
            scr();
            break;
        case EV_RTR:
            state = LCP_REQ_SENT;
            sta();
            break;
        case EV_RTA:
            state = LCP_REQ_SENT;
            break;
        case EV_RUC:
            state = LCP_REQ_SENT;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_REQ_SENT;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_REQ_SENT;
            break;
        default:
            break;
        }
        break;
    case LCP_ACK_RCVD:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            break;
        case EV_OPEN:
            state = LCP_ACK_RCVD;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            irc();
            str();
            break;
        case EV_TO_PLUS:
            state = LCP_REQ_SENT;
            scr();
            break;
        case EV_TO_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RCR_PLUS:
            state = LCP_OPENED;
            sca();
            tlu();
            break;
        case EV_RCR_MINUS:
            state = LCP_ACK_RCVD;
            scn();
            break;
        case EV_RCA:
            state = LCP_REQ_SENT;
            scr();
            break;
        case EV_RCN:
            state = LCP_REQ_SENT;
            scr();
            break;
        case EV_RTR:
            state = LCP_REQ_SENT;
            sta();
            break;
        case EV_RTA:
            state = LCP_REQ_SENT;
            break;
        case EV_RUC:
            state = LCP_ACK_RCVD;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_REQ_SENT;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_ACK_RCVD;
            break;
        default:
            break;
        }
        break;
    case LCP_ACK_SENT:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            break;
        case EV_OPEN:
            state = LCP_ACK_SENT;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            irc();
            str();
            break;
        case EV_TO_PLUS:
            state = LCP_ACK_SENT;
            scr();
            break;
        case EV_TO_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RCR_PLUS:
            state = LCP_ACK_SENT;
            sca();
            break;
        case EV_RCR_MINUS:
            state = LCP_REQ_SENT;
            scn();
            break;
        case EV_RCA:
            state = LCP_OPENED;
            irc();
            tlu();
            break;
        case EV_RCN:
            state = LCP_ACK_SENT;
            irc();
            scr();
            break;
        case EV_RTR:
            state = LCP_REQ_SENT;
            sta();
            break;
        case EV_RTA:
            state = LCP_ACK_SENT;
            break;
        case EV_RUC:
            state = LCP_ACK_SENT;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_ACK_SENT;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPED;
            tlf();
            break;
        case EV_RXR:
            state = LCP_ACK_SENT;
            break;
        default:
            break;
        }
        break;
    case LCP_OPENED:
        switch (ev) {
        case EV_DOWN:
            state = LCP_STARTING;
            tld();
            break;
        case EV_OPEN:
            state = LCP_OPENED;
            break;
        case EV_CLOSE:
            state = LCP_CLOSING;
            tld();
            irc();
            str();
            break;
        case EV_RCR_PLUS:
            state = LCP_ACK_SENT;
            tld();
            scr();
            sca();
            break;
        case EV_RCR_MINUS:
            state = LCP_REQ_SENT;
            tld();
            scr();
            scn();
            break;
        case EV_RCA:
            state = LCP_REQ_SENT;
            tld();
            scr();
            break;
        case EV_RCN:
            state = LCP_REQ_SENT;
            tld();
            scr();
            break;
        case EV_RTR:
            state = LCP_STOPPING;
            tld();
            zrc();
            sta();
            break;
        case EV_RTA:
            state = LCP_REQ_SENT;
            tld();
            scr();
            break;
        case EV_RUC:
            state = LCP_OPENED;
            scj();
            break;
        case EV_RXJ_PLUS:
            state = LCP_OPENED;
            break;
        case EV_RXJ_MINUS:
            state = LCP_STOPPING;
            tld();
            irc();
            str();
            break;
        case EV_RXR:
            state = LCP_OPENED;
            ser();
            break;
        default:
            break;
        }
        break;
    default:
        state = LCP_INITIAL;
        break;
    }
}
