/* Figures that several parts of the firmware share. */
#ifndef BARGE_H
#define BARGE_H

#define AUGERS 3u
#define TICKS_PER_SECOND 50u

#define ALARM_AUGER_STUCK 0x11u
#define ALARM_GATE_JAM 0x21u
#define ALARM_HOPPER_BRIDGED 0x31u
#define ALARM_FAN_SLOW 0x41u
#define ALARM_LINK_LOST 0x51u
#define ALARM_PUMP_DRY 0x61u
#define ALARM_BAD_STATE 0x71u

#endif
