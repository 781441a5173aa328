/* Stand-in for <avr/io.h>: the registers of the common ATmega parts as objects of the device, not of the program.
   Which address a register has differs from part to part; nothing here depends on it. */
#ifndef STEPRING_AVR_IO_H
#define STEPRING_AVR_IO_H
#include <stdint.h>
#define _BV(bit) (1 << (bit))
#define bit_is_set(place, bit) ((place) & _BV (bit))
#define bit_is_clear(place, bit) (!((place) & _BV (bit)))
#define loop_until_bit_is_set(place, bit) do { } while (bit_is_clear (place, bit))
#define loop_until_bit_is_clear(place, bit) do { } while (bit_is_set (place, bit))
extern volatile uint8_t SREG;
#define SREG SREG
extern volatile uint8_t SPL;
#define SPL SPL
extern volatile uint8_t SPH;
#define SPH SPH
extern volatile uint8_t MCUCR;
#define MCUCR MCUCR
extern volatile uint8_t MCUSR;
#define MCUSR MCUSR
extern volatile uint8_t MCUCSR;
#define MCUCSR MCUCSR
extern volatile uint8_t GPIOR0;
#define GPIOR0 GPIOR0
extern volatile uint8_t GPIOR1;
#define GPIOR1 GPIOR1
extern volatile uint8_t GPIOR2;
#define GPIOR2 GPIOR2
extern volatile uint8_t SMCR;
#define SMCR SMCR
extern volatile uint8_t PRR;
#define PRR PRR
extern volatile uint8_t PRR0;
#define PRR0 PRR0
extern volatile uint8_t PRR1;
#define PRR1 PRR1
extern volatile uint8_t CLKPR;
#define CLKPR CLKPR
extern volatile uint8_t OSCCAL;
#define OSCCAL OSCCAL
extern volatile uint8_t WDTCSR;
#define WDTCSR WDTCSR
extern volatile uint8_t WDTCR;
#define WDTCR WDTCR
extern volatile uint8_t EECR;
#define EECR EECR
extern volatile uint8_t EEDR;
#define EEDR EEDR
extern volatile uint8_t EEARL;
#define EEARL EEARL
extern volatile uint8_t EEARH;
#define EEARH EEARH
extern volatile uint8_t SPCR;
#define SPCR SPCR
extern volatile uint8_t SPSR;
#define SPSR SPSR
extern volatile uint8_t SPDR;
#define SPDR SPDR
extern volatile uint8_t TWBR;
#define TWBR TWBR
extern volatile uint8_t TWSR;
#define TWSR TWSR
extern volatile uint8_t TWAR;
#define TWAR TWAR
extern volatile uint8_t TWDR;
#define TWDR TWDR
extern volatile uint8_t TWCR;
#define TWCR TWCR
extern volatile uint8_t TWAMR;
#define TWAMR TWAMR
extern volatile uint8_t ADMUX;
#define ADMUX ADMUX
extern volatile uint8_t ADCSRA;
#define ADCSRA ADCSRA
extern volatile uint8_t ADCSRB;
#define ADCSRB ADCSRB
extern volatile uint8_t ADCL;
#define ADCL ADCL
extern volatile uint8_t ADCH;
#define ADCH ADCH
extern volatile uint8_t DIDR0;
#define DIDR0 DIDR0
extern volatile uint8_t DIDR1;
#define DIDR1 DIDR1
extern volatile uint8_t DIDR2;
#define DIDR2 DIDR2
extern volatile uint8_t ACSR;
#define ACSR ACSR
extern volatile uint8_t EICRA;
#define EICRA EICRA
extern volatile uint8_t EICRB;
#define EICRB EICRB
extern volatile uint8_t EIMSK;
#define EIMSK EIMSK
extern volatile uint8_t EIFR;
#define EIFR EIFR
extern volatile uint8_t GICR;
#define GICR GICR
extern volatile uint8_t GIFR;
#define GIFR GIFR
extern volatile uint8_t GIMSK;
#define GIMSK GIMSK
extern volatile uint8_t PCICR;
#define PCICR PCICR
extern volatile uint8_t PCIFR;
#define PCIFR PCIFR
extern volatile uint8_t PCMSK0;
#define PCMSK0 PCMSK0
extern volatile uint8_t PCMSK1;
#define PCMSK1 PCMSK1
extern volatile uint8_t PCMSK2;
#define PCMSK2 PCMSK2
extern volatile uint8_t TIMSK;
#define TIMSK TIMSK
extern volatile uint8_t TIFR;
#define TIFR TIFR
extern volatile uint8_t GTCCR;
#define GTCCR GTCCR
extern volatile uint8_t TCCR0;
#define TCCR0 TCCR0
extern volatile uint8_t TCCR2;
#define TCCR2 TCCR2
extern volatile uint8_t OCR0;
#define OCR0 OCR0
extern volatile uint8_t OCR2;
#define OCR2 OCR2
extern volatile uint8_t ASSR;
#define ASSR ASSR
extern volatile uint8_t SPMCSR;
#define SPMCSR SPMCSR
extern volatile uint8_t UCSRA;
#define UCSRA UCSRA
extern volatile uint8_t UCSRB;
#define UCSRB UCSRB
extern volatile uint8_t UCSRC;
#define UCSRC UCSRC
extern volatile uint8_t UBRRL;
#define UBRRL UBRRL
extern volatile uint8_t UBRRH;
#define UBRRH UBRRH
extern volatile uint8_t UDR;
#define UDR UDR
extern volatile uint8_t PORTA;
#define PORTA PORTA
extern volatile uint8_t DDRA;
#define DDRA DDRA
extern volatile uint8_t PINA;
#define PINA PINA
extern volatile uint8_t PORTB;
#define PORTB PORTB
extern volatile uint8_t DDRB;
#define DDRB DDRB
extern volatile uint8_t PINB;
#define PINB PINB
extern volatile uint8_t PORTC;
#define PORTC PORTC
extern volatile uint8_t DDRC;
#define DDRC DDRC
extern volatile uint8_t PINC;
#define PINC PINC
extern volatile uint8_t PORTD;
#define PORTD PORTD
extern volatile uint8_t DDRD;
#define DDRD DDRD
extern volatile uint8_t PIND;
#define PIND PIND
extern volatile uint8_t PORTE;
#define PORTE PORTE
extern volatile uint8_t DDRE;
#define DDRE DDRE
extern volatile uint8_t PINE;
#define PINE PINE
extern volatile uint8_t PORTF;
#define PORTF PORTF
extern volatile uint8_t DDRF;
#define DDRF DDRF
extern volatile uint8_t PINF;
#define PINF PINF
extern volatile uint8_t PORTG;
#define PORTG PORTG
extern volatile uint8_t DDRG;
#define DDRG DDRG
extern volatile uint8_t PING;
#define PING PING
extern volatile uint8_t PORTH;
#define PORTH PORTH
extern volatile uint8_t DDRH;
#define DDRH DDRH
extern volatile uint8_t PINH;
#define PINH PINH
extern volatile uint8_t PORTJ;
#define PORTJ PORTJ
extern volatile uint8_t DDRJ;
#define DDRJ DDRJ
extern volatile uint8_t PINJ;
#define PINJ PINJ
extern volatile uint8_t PORTK;
#define PORTK PORTK
extern volatile uint8_t DDRK;
#define DDRK DDRK
extern volatile uint8_t PINK;
#define PINK PINK
extern volatile uint8_t PORTL;
#define PORTL PORTL
extern volatile uint8_t DDRL;
#define DDRL DDRL
extern volatile uint8_t PINL;
#define PINL PINL
extern volatile uint8_t TCCR0A;
#define TCCR0A TCCR0A
extern volatile uint8_t TCCR0B;
#define TCCR0B TCCR0B
extern volatile uint8_t TIMSK0;
#define TIMSK0 TIMSK0
extern volatile uint8_t TIFR0;
#define TIFR0 TIFR0
extern volatile uint8_t TCCR1A;
#define TCCR1A TCCR1A
extern volatile uint8_t TCCR1B;
#define TCCR1B TCCR1B
extern volatile uint8_t TIMSK1;
#define TIMSK1 TIMSK1
extern volatile uint8_t TIFR1;
#define TIFR1 TIFR1
extern volatile uint8_t TCCR2A;
#define TCCR2A TCCR2A
extern volatile uint8_t TCCR2B;
#define TCCR2B TCCR2B
extern volatile uint8_t TIMSK2;
#define TIMSK2 TIMSK2
extern volatile uint8_t TIFR2;
#define TIFR2 TIFR2
extern volatile uint8_t TCCR3A;
#define TCCR3A TCCR3A
extern volatile uint8_t TCCR3B;
#define TCCR3B TCCR3B
extern volatile uint8_t TIMSK3;
#define TIMSK3 TIMSK3
extern volatile uint8_t TIFR3;
#define TIFR3 TIFR3
extern volatile uint8_t TCCR4A;
#define TCCR4A TCCR4A
extern volatile uint8_t TCCR4B;
#define TCCR4B TCCR4B
extern volatile uint8_t TIMSK4;
#define TIMSK4 TIMSK4
extern volatile uint8_t TIFR4;
#define TIFR4 TIFR4
extern volatile uint8_t TCCR5A;
#define TCCR5A TCCR5A
extern volatile uint8_t TCCR5B;
#define TCCR5B TCCR5B
extern volatile uint8_t TIMSK5;
#define TIMSK5 TIMSK5
extern volatile uint8_t TIFR5;
#define TIFR5 TIFR5
extern volatile uint8_t TCCR1C;
#define TCCR1C TCCR1C
extern volatile uint8_t OCR1AL;
#define OCR1AL OCR1AL
extern volatile uint8_t OCR1AH;
#define OCR1AH OCR1AH
extern volatile uint8_t TCNT1L;
#define TCNT1L TCNT1L
extern volatile uint8_t TCNT1H;
#define TCNT1H TCNT1H
extern volatile uint8_t ICR1L;
#define ICR1L ICR1L
extern volatile uint8_t ICR1H;
#define ICR1H ICR1H
extern volatile uint8_t TCCR3C;
#define TCCR3C TCCR3C
extern volatile uint8_t OCR3AL;
#define OCR3AL OCR3AL
extern volatile uint8_t OCR3AH;
#define OCR3AH OCR3AH
extern volatile uint8_t TCNT3L;
#define TCNT3L TCNT3L
extern volatile uint8_t TCNT3H;
#define TCNT3H TCNT3H
extern volatile uint8_t ICR3L;
#define ICR3L ICR3L
extern volatile uint8_t ICR3H;
#define ICR3H ICR3H
extern volatile uint8_t TCCR4C;
#define TCCR4C TCCR4C
extern volatile uint8_t OCR4AL;
#define OCR4AL OCR4AL
extern volatile uint8_t OCR4AH;
#define OCR4AH OCR4AH
extern volatile uint8_t TCNT4L;
#define TCNT4L TCNT4L
extern volatile uint8_t TCNT4H;
#define TCNT4H TCNT4H
extern volatile uint8_t ICR4L;
#define ICR4L ICR4L
extern volatile uint8_t ICR4H;
#define ICR4H ICR4H
extern volatile uint8_t TCCR5C;
#define TCCR5C TCCR5C
extern volatile uint8_t OCR5AL;
#define OCR5AL OCR5AL
extern volatile uint8_t OCR5AH;
#define OCR5AH OCR5AH
extern volatile uint8_t TCNT5L;
#define TCNT5L TCNT5L
extern volatile uint8_t TCNT5H;
#define TCNT5H TCNT5H
extern volatile uint8_t ICR5L;
#define ICR5L ICR5L
extern volatile uint8_t ICR5H;
#define ICR5H ICR5H
extern volatile uint8_t TCNT0;
#define TCNT0 TCNT0
extern volatile uint8_t OCR0A;
#define OCR0A OCR0A
extern volatile uint8_t OCR0B;
#define OCR0B OCR0B
extern volatile uint8_t TCNT2;
#define TCNT2 TCNT2
extern volatile uint8_t OCR2A;
#define OCR2A OCR2A
extern volatile uint8_t OCR2B;
#define OCR2B OCR2B
extern volatile uint8_t UCSR0A;
#define UCSR0A UCSR0A
extern volatile uint8_t UCSR0B;
#define UCSR0B UCSR0B
extern volatile uint8_t UCSR0C;
#define UCSR0C UCSR0C
extern volatile uint8_t UDR0;
#define UDR0 UDR0
extern volatile uint8_t UBRR0L;
#define UBRR0L UBRR0L
extern volatile uint8_t UBRR0H;
#define UBRR0H UBRR0H
extern volatile uint8_t UCSR1A;
#define UCSR1A UCSR1A
extern volatile uint8_t UCSR1B;
#define UCSR1B UCSR1B
extern volatile uint8_t UCSR1C;
#define UCSR1C UCSR1C
extern volatile uint8_t UDR1;
#define UDR1 UDR1
extern volatile uint8_t UBRR1L;
#define UBRR1L UBRR1L
extern volatile uint8_t UBRR1H;
#define UBRR1H UBRR1H
extern volatile uint8_t UCSR2A;
#define UCSR2A UCSR2A
extern volatile uint8_t UCSR2B;
#define UCSR2B UCSR2B
extern volatile uint8_t UCSR2C;
#define UCSR2C UCSR2C
extern volatile uint8_t UDR2;
#define UDR2 UDR2
extern volatile uint8_t UBRR2L;
#define UBRR2L UBRR2L
extern volatile uint8_t UBRR2H;
#define UBRR2H UBRR2H
extern volatile uint8_t UCSR3A;
#define UCSR3A UCSR3A
extern volatile uint8_t UCSR3B;
#define UCSR3B UCSR3B
extern volatile uint8_t UCSR3C;
#define UCSR3C UCSR3C
extern volatile uint8_t UDR3;
#define UDR3 UDR3
extern volatile uint8_t UBRR3L;
#define UBRR3L UBRR3L
extern volatile uint8_t UBRR3H;
#define UBRR3H UBRR3H
extern volatile uint16_t SP;
#define SP SP
extern volatile uint16_t ADC;
#define ADC ADC
extern volatile uint16_t ADCW;
#define ADCW ADCW
extern volatile uint16_t EEAR;
#define EEAR EEAR
extern volatile uint16_t UBRR0;
#define UBRR0 UBRR0
extern volatile uint16_t UBRR1;
#define UBRR1 UBRR1
extern volatile uint16_t UBRR2;
#define UBRR2 UBRR2
extern volatile uint16_t UBRR3;
#define UBRR3 UBRR3
extern volatile uint16_t TCNT1;
#define TCNT1 TCNT1
extern volatile uint16_t OCR1A;
#define OCR1A OCR1A
extern volatile uint16_t OCR1B;
#define OCR1B OCR1B
extern volatile uint16_t OCR1C;
#define OCR1C OCR1C
extern volatile uint16_t ICR1;
#define ICR1 ICR1
extern volatile uint16_t TCNT3;
#define TCNT3 TCNT3
extern volatile uint16_t OCR3A;
#define OCR3A OCR3A
extern volatile uint16_t OCR3B;
#define OCR3B OCR3B
extern volatile uint16_t OCR3C;
#define OCR3C OCR3C
extern volatile uint16_t ICR3;
#define ICR3 ICR3
extern volatile uint16_t TCNT4;
#define TCNT4 TCNT4
extern volatile uint16_t OCR4A;
#define OCR4A OCR4A
extern volatile uint16_t OCR4B;
#define OCR4B OCR4B
extern volatile uint16_t OCR4C;
#define OCR4C OCR4C
extern volatile uint16_t ICR4;
#define ICR4 ICR4
extern volatile uint16_t TCNT5;
#define TCNT5 TCNT5
extern volatile uint16_t OCR5A;
#define OCR5A OCR5A
extern volatile uint16_t OCR5B;
#define OCR5B OCR5B
extern volatile uint16_t OCR5C;
#define OCR5C OCR5C
extern volatile uint16_t ICR5;
#define ICR5 ICR5
#define ACBG 6
#define ACD 7
#define ACI 4
#define ACIC 2
#define ACIE 3
#define ACIS0 0
#define ACIS1 1
#define ACME 6
#define ACO 5
#define ADATE 5
#define ADEN 7
#define ADIE 3
#define ADIF 4
#define ADLAR 5
#define ADPS0 0
#define ADPS1 1
#define ADPS2 2
#define ADSC 6
#define ADTS0 0
#define ADTS1 1
#define ADTS2 2
#define AS2 5
#define BLBSET 3
#define BORF 2
#define CLKPCE 7
#define CLKPS0 0
#define CLKPS1 1
#define CLKPS2 2
#define CLKPS3 3
#define COM0A0 6
#define COM0A1 7
#define COM0B0 4
#define COM0B1 5
#define COM0C0 2
#define COM0C1 3
#define COM1A0 6
#define COM1A1 7
#define COM1B0 4
#define COM1B1 5
#define COM1C0 2
#define COM1C1 3
#define COM2A0 6
#define COM2A1 7
#define COM2B0 4
#define COM2B1 5
#define COM2C0 2
#define COM2C1 3
#define COM3A0 6
#define COM3A1 7
#define COM3B0 4
#define COM3B1 5
#define COM3C0 2
#define COM3C1 3
#define COM4A0 6
#define COM4A1 7
#define COM4B0 4
#define COM4B1 5
#define COM4C0 2
#define COM4C1 3
#define COM5A0 6
#define COM5A1 7
#define COM5B0 4
#define COM5B1 5
#define COM5C0 2
#define COM5C1 3
#define CPHA 2
#define CPOL 3
#define CS00 0
#define CS01 1
#define CS02 2
#define CS10 0
#define CS11 1
#define CS12 2
#define CS20 0
#define CS21 1
#define CS22 2
#define CS30 0
#define CS31 1
#define CS32 2
#define CS40 0
#define CS41 1
#define CS42 2
#define CS50 0
#define CS51 1
#define CS52 2
#define DDA0 0
#define DDA1 1
#define DDA2 2
#define DDA3 3
#define DDA4 4
#define DDA5 5
#define DDA6 6
#define DDA7 7
#define DDB0 0
#define DDB1 1
#define DDB2 2
#define DDB3 3
#define DDB4 4
#define DDB5 5
#define DDB6 6
#define DDB7 7
#define DDC0 0
#define DDC1 1
#define DDC2 2
#define DDC3 3
#define DDC4 4
#define DDC5 5
#define DDC6 6
#define DDC7 7
#define DDD0 0
#define DDD1 1
#define DDD2 2
#define DDD3 3
#define DDD4 4
#define DDD5 5
#define DDD6 6
#define DDD7 7
#define DDE0 0
#define DDE1 1
#define DDE2 2
#define DDE3 3
#define DDE4 4
#define DDE5 5
#define DDE6 6
#define DDE7 7
#define DDF0 0
#define DDF1 1
#define DDF2 2
#define DDF3 3
#define DDF4 4
#define DDF5 5
#define DDF6 6
#define DDF7 7
#define DDG0 0
#define DDG1 1
#define DDG2 2
#define DDG3 3
#define DDG4 4
#define DDG5 5
#define DDG6 6
#define DDG7 7
#define DDH0 0
#define DDH1 1
#define DDH2 2
#define DDH3 3
#define DDH4 4
#define DDH5 5
#define DDH6 6
#define DDH7 7
#define DDJ0 0
#define DDJ1 1
#define DDJ2 2
#define DDJ3 3
#define DDJ4 4
#define DDJ5 5
#define DDJ6 6
#define DDJ7 7
#define DDK0 0
#define DDK1 1
#define DDK2 2
#define DDK3 3
#define DDK4 4
#define DDK5 5
#define DDK6 6
#define DDK7 7
#define DDL0 0
#define DDL1 1
#define DDL2 2
#define DDL3 3
#define DDL4 4
#define DDL5 5
#define DDL6 6
#define DDL7 7
#define DOR 3
#define DOR0 3
#define DOR1 3
#define DOR2 3
#define DOR3 3
#define DORD 5
#define EEMPE 2
#define EEMWE 2
#define EEPE 1
#define EEPM0 4
#define EEPM1 5
#define EERE 0
#define EERIE 3
#define EEWE 1
#define EXCLK 6
#define EXTRF 1
#define FE 4
#define FE0 4
#define FE1 4
#define FE2 4
#define FE3 4
#define FOC0A 7
#define FOC0B 6
#define FOC2A 7
#define FOC2B 6
#define ICES0 6
#define ICES1 6
#define ICES2 6
#define ICES3 6
#define ICES4 6
#define ICES5 6
#define ICF0 5
#define ICF1 5
#define ICF2 5
#define ICF3 5
#define ICF4 5
#define ICF5 5
#define ICIE0 5
#define ICIE1 5
#define ICIE2 5
#define ICIE3 5
#define ICIE4 5
#define ICIE5 5
#define ICNC0 7
#define ICNC1 7
#define ICNC2 7
#define ICNC3 7
#define ICNC4 7
#define ICNC5 7
#define INT0 0
#define INT1 1
#define INT2 2
#define INT3 3
#define INT4 4
#define INT5 5
#define INT6 6
#define INT7 7
#define INTF0 0
#define INTF1 1
#define INTF2 2
#define INTF3 3
#define INTF4 4
#define INTF5 5
#define INTF6 6
#define INTF7 7
#define ISC00 0
#define ISC01 1
#define ISC10 2
#define ISC11 3
#define ISC20 4
#define ISC21 5
#define ISC30 6
#define ISC31 7
#define IVCE 0
#define IVSEL 1
#define JTRF 4
#define MPCM 0
#define MPCM0 0
#define MPCM1 0
#define MPCM2 0
#define MPCM3 0
#define MSTR 4
#define MUX0 0
#define MUX1 1
#define MUX2 2
#define MUX3 3
#define MUX4 4
#define MUX5 3
#define OCF0A 1
#define OCF0B 2
#define OCF0C 3
#define OCF1A 1
#define OCF1B 2
#define OCF1C 3
#define OCF2A 1
#define OCF2B 2
#define OCF2C 3
#define OCF3A 1
#define OCF3B 2
#define OCF3C 3
#define OCF4A 1
#define OCF4B 2
#define OCF4C 3
#define OCF5A 1
#define OCF5B 2
#define OCF5C 3
#define OCIE0A 1
#define OCIE0B 2
#define OCIE0C 3
#define OCIE1A 1
#define OCIE1B 2
#define OCIE1C 3
#define OCIE2A 1
#define OCIE2B 2
#define OCIE2C 3
#define OCIE3A 1
#define OCIE3B 2
#define OCIE3C 3
#define OCIE4A 1
#define OCIE4B 2
#define OCIE4C 3
#define OCIE5A 1
#define OCIE5B 2
#define OCIE5C 3
#define OCR2AUB 3
#define OCR2BUB 2
#define PA0 0
#define PA1 1
#define PA2 2
#define PA3 3
#define PA4 4
#define PA5 5
#define PA6 6
#define PA7 7
#define PB0 0
#define PB1 1
#define PB2 2
#define PB3 3
#define PB4 4
#define PB5 5
#define PB6 6
#define PB7 7
#define PC0 0
#define PC1 1
#define PC2 2
#define PC3 3
#define PC4 4
#define PC5 5
#define PC6 6
#define PC7 7
#define PCIE0 0
#define PCIE1 1
#define PCIE2 2
#define PCIF0 0
#define PCIF1 1
#define PCIF2 2
#define PCINT0 0
#define PCINT1 1
#define PCINT10 2
#define PCINT11 3
#define PCINT12 4
#define PCINT13 5
#define PCINT14 6
#define PCINT15 7
#define PCINT16 0
#define PCINT17 1
#define PCINT18 2
#define PCINT19 3
#define PCINT2 2
#define PCINT20 4
#define PCINT21 5
#define PCINT22 6
#define PCINT23 7
#define PCINT3 3
#define PCINT4 4
#define PCINT5 5
#define PCINT6 6
#define PCINT7 7
#define PCINT8 0
#define PCINT9 1
#define PD0 0
#define PD1 1
#define PD2 2
#define PD3 3
#define PD4 4
#define PD5 5
#define PD6 6
#define PD7 7
#define PE0 0
#define PE1 1
#define PE2 2
#define PE3 3
#define PE4 4
#define PE5 5
#define PE6 6
#define PE7 7
#define PF0 0
#define PF1 1
#define PF2 2
#define PF3 3
#define PF4 4
#define PF5 5
#define PF6 6
#define PF7 7
#define PG0 0
#define PG1 1
#define PG2 2
#define PG3 3
#define PG4 4
#define PG5 5
#define PG6 6
#define PG7 7
#define PGERS 1
#define PGWRT 2
#define PH0 0
#define PH1 1
#define PH2 2
#define PH3 3
#define PH4 4
#define PH5 5
#define PH6 6
#define PH7 7
#define PINA0 0
#define PINA1 1
#define PINA2 2
#define PINA3 3
#define PINA4 4
#define PINA5 5
#define PINA6 6
#define PINA7 7
#define PINB0 0
#define PINB1 1
#define PINB2 2
#define PINB3 3
#define PINB4 4
#define PINB5 5
#define PINB6 6
#define PINB7 7
#define PINC0 0
#define PINC1 1
#define PINC2 2
#define PINC3 3
#define PINC4 4
#define PINC5 5
#define PINC6 6
#define PINC7 7
#define PIND0 0
#define PIND1 1
#define PIND2 2
#define PIND3 3
#define PIND4 4
#define PIND5 5
#define PIND6 6
#define PIND7 7
#define PINE0 0
#define PINE1 1
#define PINE2 2
#define PINE3 3
#define PINE4 4
#define PINE5 5
#define PINE6 6
#define PINE7 7
#define PINF0 0
#define PINF1 1
#define PINF2 2
#define PINF3 3
#define PINF4 4
#define PINF5 5
#define PINF6 6
#define PINF7 7
#define PING0 0
#define PING1 1
#define PING2 2
#define PING3 3
#define PING4 4
#define PING5 5
#define PING6 6
#define PING7 7
#define PINH0 0
#define PINH1 1
#define PINH2 2
#define PINH3 3
#define PINH4 4
#define PINH5 5
#define PINH6 6
#define PINH7 7
#define PINJ0 0
#define PINJ1 1
#define PINJ2 2
#define PINJ3 3
#define PINJ4 4
#define PINJ5 5
#define PINJ6 6
#define PINJ7 7
#define PINK0 0
#define PINK1 1
#define PINK2 2
#define PINK3 3
#define PINK4 4
#define PINK5 5
#define PINK6 6
#define PINK7 7
#define PINL0 0
#define PINL1 1
#define PINL2 2
#define PINL3 3
#define PINL4 4
#define PINL5 5
#define PINL6 6
#define PINL7 7
#define PJ0 0
#define PJ1 1
#define PJ2 2
#define PJ3 3
#define PJ4 4
#define PJ5 5
#define PJ6 6
#define PJ7 7
#define PK0 0
#define PK1 1
#define PK2 2
#define PK3 3
#define PK4 4
#define PK5 5
#define PK6 6
#define PK7 7
#define PL0 0
#define PL1 1
#define PL2 2
#define PL3 3
#define PL4 4
#define PL5 5
#define PL6 6
#define PL7 7
#define PORF 0
#define PORTA0 0
#define PORTA1 1
#define PORTA2 2
#define PORTA3 3
#define PORTA4 4
#define PORTA5 5
#define PORTA6 6
#define PORTA7 7
#define PORTB0 0
#define PORTB1 1
#define PORTB2 2
#define PORTB3 3
#define PORTB4 4
#define PORTB5 5
#define PORTB6 6
#define PORTB7 7
#define PORTC0 0
#define PORTC1 1
#define PORTC2 2
#define PORTC3 3
#define PORTC4 4
#define PORTC5 5
#define PORTC6 6
#define PORTC7 7
#define PORTD0 0
#define PORTD1 1
#define PORTD2 2
#define PORTD3 3
#define PORTD4 4
#define PORTD5 5
#define PORTD6 6
#define PORTD7 7
#define PORTE0 0
#define PORTE1 1
#define PORTE2 2
#define PORTE3 3
#define PORTE4 4
#define PORTE5 5
#define PORTE6 6
#define PORTE7 7
#define PORTF0 0
#define PORTF1 1
#define PORTF2 2
#define PORTF3 3
#define PORTF4 4
#define PORTF5 5
#define PORTF6 6
#define PORTF7 7
#define PORTG0 0
#define PORTG1 1
#define PORTG2 2
#define PORTG3 3
#define PORTG4 4
#define PORTG5 5
#define PORTG6 6
#define PORTG7 7
#define PORTH0 0
#define PORTH1 1
#define PORTH2 2
#define PORTH3 3
#define PORTH4 4
#define PORTH5 5
#define PORTH6 6
#define PORTH7 7
#define PORTJ0 0
#define PORTJ1 1
#define PORTJ2 2
#define PORTJ3 3
#define PORTJ4 4
#define PORTJ5 5
#define PORTJ6 6
#define PORTJ7 7
#define PORTK0 0
#define PORTK1 1
#define PORTK2 2
#define PORTK3 3
#define PORTK4 4
#define PORTK5 5
#define PORTK6 6
#define PORTK7 7
#define PORTL0 0
#define PORTL1 1
#define PORTL2 2
#define PORTL3 3
#define PORTL4 4
#define PORTL5 5
#define PORTL6 6
#define PORTL7 7
#define PRADC 0
#define PRSPI 2
#define PRTIM0 5
#define PRTIM1 3
#define PRTIM2 6
#define PRTWI 7
#define PRUSART0 1
#define PSRASY 1
#define PSRSYNC 0
#define PUD 4
#define REFS0 6
#define REFS1 7
#define RWWSB 6
#define RWWSRE 4
#define RXB8 1
#define RXB80 1
#define RXB81 1
#define RXB82 1
#define RXB83 1
#define RXC 7
#define RXC0 7
#define RXC1 7
#define RXC2 7
#define RXC3 7
#define RXCIE 7
#define RXCIE0 7
#define RXCIE1 7
#define RXCIE2 7
#define RXCIE3 7
#define RXEN 4
#define RXEN0 4
#define RXEN1 4
#define RXEN2 4
#define RXEN3 4
#define SE 0
#define SIGRD 5
#define SM0 1
#define SM1 2
#define SM2 3
#define SPE 6
#define SPI2X 0
#define SPIE 7
#define SPIF 7
#define SPMEN 0
#define SPMIE 7
#define SPR0 0
#define SPR1 1
#define SREG_C 0
#define SREG_H 5
#define SREG_I 7
#define SREG_N 2
#define SREG_S 4
#define SREG_T 6
#define SREG_V 3
#define SREG_Z 1
#define TCN2UB 4
#define TCR2AUB 1
#define TCR2BUB 0
#define TOIE0 0
#define TOIE1 0
#define TOIE2 0
#define TOIE3 0
#define TOIE4 0
#define TOIE5 0
#define TOV0 0
#define TOV1 0
#define TOV2 0
#define TOV3 0
#define TOV4 0
#define TOV5 0
#define TSM 7
#define TWEA 6
#define TWEN 2
#define TWGCE 0
#define TWIE 0
#define TWINT 7
#define TWPS0 0
#define TWPS1 1
#define TWSTA 5
#define TWSTO 4
#define TWWC 3
#define TXB8 0
#define TXB80 0
#define TXB81 0
#define TXB82 0
#define TXB83 0
#define TXC 6
#define TXC0 6
#define TXC1 6
#define TXC2 6
#define TXC3 6
#define TXCIE 6
#define TXCIE0 6
#define TXCIE1 6
#define TXCIE2 6
#define TXCIE3 6
#define TXEN 3
#define TXEN0 3
#define TXEN1 3
#define TXEN2 3
#define TXEN3 3
#define U2X 1
#define U2X0 1
#define U2X1 1
#define U2X2 1
#define U2X3 1
#define UCPOL 0
#define UCPOL0 0
#define UCPOL1 0
#define UCPOL2 0
#define UCPOL3 0
#define UCSZ0 1
#define UCSZ00 1
#define UCSZ01 2
#define UCSZ02 2
#define UCSZ1 2
#define UCSZ10 1
#define UCSZ11 2
#define UCSZ12 2
#define UCSZ2 2
#define UCSZ20 1
#define UCSZ21 2
#define UCSZ22 2
#define UCSZ30 1
#define UCSZ31 2
#define UCSZ32 2
#define UDRE 5
#define UDRE0 5
#define UDRE1 5
#define UDRE2 5
#define UDRE3 5
#define UDRIE 5
#define UDRIE0 5
#define UDRIE1 5
#define UDRIE2 5
#define UDRIE3 5
#define UMSEL 6
#define UMSEL00 6
#define UMSEL01 7
#define UMSEL10 6
#define UMSEL11 7
#define UMSEL20 6
#define UMSEL21 7
#define UMSEL30 6
#define UMSEL31 7
#define UPE 2
#define UPE0 2
#define UPE1 2
#define UPE2 2
#define UPE3 2
#define UPM0 4
#define UPM00 4
#define UPM01 5
#define UPM1 5
#define UPM10 4
#define UPM11 5
#define UPM20 4
#define UPM21 5
#define UPM30 4
#define UPM31 5
#define URSEL 7
#define USBS 3
#define USBS0 3
#define USBS1 3
#define USBS2 3
#define USBS3 3
#define WCOL 6
#define WDCE 4
#define WDE 3
#define WDIE 6
#define WDIF 7
#define WDP0 0
#define WDP1 1
#define WDP2 2
#define WDP3 5
#define WDRF 3
#define WGM00 0
#define WGM01 1
#define WGM02 3
#define WGM03 4
#define WGM10 0
#define WGM11 1
#define WGM12 3
#define WGM13 4
#define WGM20 0
#define WGM21 1
#define WGM22 3
#define WGM23 4
#define WGM30 0
#define WGM31 1
#define WGM32 3
#define WGM33 4
#define WGM40 0
#define WGM41 1
#define WGM42 3
#define WGM43 4
#define WGM50 0
#define WGM51 1
#define WGM52 3
#define WGM53 4
#define INT0_vect INT0_vect
#define INT1_vect INT1_vect
#define INT2_vect INT2_vect
#define INT3_vect INT3_vect
#define INT4_vect INT4_vect
#define INT5_vect INT5_vect
#define INT6_vect INT6_vect
#define INT7_vect INT7_vect
#define PCINT0_vect PCINT0_vect
#define PCINT1_vect PCINT1_vect
#define PCINT2_vect PCINT2_vect
#define WDT_vect WDT_vect
#define SPI_STC_vect SPI_STC_vect
#define ADC_vect ADC_vect
#define EE_READY_vect EE_READY_vect
#define EE_RDY_vect EE_RDY_vect
#define ANALOG_COMP_vect ANALOG_COMP_vect
#define ANA_COMP_vect ANA_COMP_vect
#define TWI_vect TWI_vect
#define SPM_READY_vect SPM_READY_vect
#define USART_RX_vect USART_RX_vect
#define USART_UDRE_vect USART_UDRE_vect
#define USART_TX_vect USART_TX_vect
#define USART_RXC_vect USART_RXC_vect
#define USART_TXC_vect USART_TXC_vect
#define TIMER0_CAPT_vect TIMER0_CAPT_vect
#define TIMER0_COMPA_vect TIMER0_COMPA_vect
#define TIMER0_COMPB_vect TIMER0_COMPB_vect
#define TIMER0_COMPC_vect TIMER0_COMPC_vect
#define TIMER0_COMP_vect TIMER0_COMP_vect
#define TIMER0_OVF_vect TIMER0_OVF_vect
#define TIMER1_CAPT_vect TIMER1_CAPT_vect
#define TIMER1_COMPA_vect TIMER1_COMPA_vect
#define TIMER1_COMPB_vect TIMER1_COMPB_vect
#define TIMER1_COMPC_vect TIMER1_COMPC_vect
#define TIMER1_COMP_vect TIMER1_COMP_vect
#define TIMER1_OVF_vect TIMER1_OVF_vect
#define TIMER2_CAPT_vect TIMER2_CAPT_vect
#define TIMER2_COMPA_vect TIMER2_COMPA_vect
#define TIMER2_COMPB_vect TIMER2_COMPB_vect
#define TIMER2_COMPC_vect TIMER2_COMPC_vect
#define TIMER2_COMP_vect TIMER2_COMP_vect
#define TIMER2_OVF_vect TIMER2_OVF_vect
#define TIMER3_CAPT_vect TIMER3_CAPT_vect
#define TIMER3_COMPA_vect TIMER3_COMPA_vect
#define TIMER3_COMPB_vect TIMER3_COMPB_vect
#define TIMER3_COMPC_vect TIMER3_COMPC_vect
#define TIMER3_COMP_vect TIMER3_COMP_vect
#define TIMER3_OVF_vect TIMER3_OVF_vect
#define TIMER4_CAPT_vect TIMER4_CAPT_vect
#define TIMER4_COMPA_vect TIMER4_COMPA_vect
#define TIMER4_COMPB_vect TIMER4_COMPB_vect
#define TIMER4_COMPC_vect TIMER4_COMPC_vect
#define TIMER4_COMP_vect TIMER4_COMP_vect
#define TIMER4_OVF_vect TIMER4_OVF_vect
#define TIMER5_CAPT_vect TIMER5_CAPT_vect
#define TIMER5_COMPA_vect TIMER5_COMPA_vect
#define TIMER5_COMPB_vect TIMER5_COMPB_vect
#define TIMER5_COMPC_vect TIMER5_COMPC_vect
#define TIMER5_COMP_vect TIMER5_COMP_vect
#define TIMER5_OVF_vect TIMER5_OVF_vect
#define USART0_RX_vect USART0_RX_vect
#define USART0_UDRE_vect USART0_UDRE_vect
#define USART0_TX_vect USART0_TX_vect
#define USART1_RX_vect USART1_RX_vect
#define USART1_UDRE_vect USART1_UDRE_vect
#define USART1_TX_vect USART1_TX_vect
#define USART2_RX_vect USART2_RX_vect
#define USART2_UDRE_vect USART2_UDRE_vect
#define USART2_TX_vect USART2_TX_vect
#define USART3_RX_vect USART3_RX_vect
#define USART3_UDRE_vect USART3_UDRE_vect
#define USART3_TX_vect USART3_TX_vect
#define RAMSTART 0x100
#define RAMEND 0x8FF
#define FLASHEND 0x7FFF
#define E2END 0x3FF
#define SPM_PAGESIZE 128
#endif
