package bench

// Example is a bench file with every key, as shown by the help.
const Example = `name = "attic bench"

[circuit]
kind = "load"              # load, diode or fixed
rl = "10 ohm"              # load resistor: value, tolerance, rating
rl_tol = "1 %"
rl_rating = "50 W"
vdd = "12 V"               # supply
# vds = "10 V"             # drain voltage, for kind = "fixed"
ammeter = "drain"          # drain, source or none
gate_return = "source"     # source or ground: where the gate meter's return is
current = "dc"             # dc or pulsed
# pulse_width = "300 us"
# pulse_duty = "2 %"
# pulse_delay = "250 us"
dwell = "10 s"             # wait at each gate voltage before reading
bleed = "100 kohm"         # resistor from gate to source that is fitted for good

[limits]                   # greatest values allowed on this bench
vgs = "10 V"
vds = "30 V"
id = "1 A"
pd = "10 W"
temp = "100 degC"

[[meter]]
role = "gate"              # gate, current, load, drain, supply or temperature
name = "handheld 1"
serial = "A1234"
line = "/dev/serial/by-id/usb-lead-1"   # for live readings
speaks = "fs9721"          # format of what it sends, for live readings
settings = "2400 8N1"      # of a serial line; without it, as is usual for the format
integration = "100 ms"     # how long it measures for one reading
processing = "50 ms"       # from the end of that to the first byte
lag = "0 ms"               # further delay, where gatesill sweep --find-lag found one
lag_u = "30 ms"            # greatest error of these three together
isolated = true            # its input is not tied to the computer's ground
calibrated = 2026-03-02
due = 2027-03-02
coverage = "limit"         # what the accuracy statement is: limit, k=2 or 99 %

  [[meter.range]]          # one table a range
  top = "6 V"              # greatest reading
  percent = 0.5            # of the reading
  counts = 2               # of the last digit
  resolution = "1 mV"      # one count
  noise = "0.3 mV"         # standard deviation of repeated readings, if known

[[meter]]
role = "current"
name = "bench meter"
line = "tcp:192.0.2.7:5025"   # host and port of an instrument on the network
speaks = "scpi"
setup = ["*CLS", "CONF:CURR:DC 1"]   # sent once, when the line is opened
ask = "READ?"              # sent for every reading
every = "250 ms"           # time between two questions
due = 2027-03-02

  [[meter.range]]
  top = "1 A"
  percent = 0.1
  counts = 2
  resolution = "10 uA"
  burden = "0.1 ohm"       # resistance the meter puts into the lead

[[meter]]
role = "load"              # two meters on one line: its columns
line = "/dev/serial/by-id/usb-columns"
speaks = "text"
settings = "115200 8N1"
column = 1
unit = "mV"                # of a column that names no unit itself
separator = ";"
decimal = "comma"          # point or comma
isolated = true

[[meter]]
role = "temperature"
line = "/dev/serial/by-id/usb-columns"
column = 2
unit = "degC"

# A meter that sends nothing is read by you: line = "keyboard", speaks = "text", column = 1.

[[supply]]
drives = "gate"            # gate or drain; only for sweeps that the program drives
name = "supply 1"
line = "/dev/serial/by-id/usb-supply"
settings = "9600 8N1"
output = 1                 # number of its output, where it has several
current_limit = "20 mA"
isolated = true
swapped = false            # true: leads swapped, for gate voltages below 0
calibrated = 2026-03-02
due = 2027-03-02

[[supply]]
drives = "drain"
name = "supply 1"
line = "/dev/serial/by-id/usb-supply"
settings = "9600 8N1"
output = 2
current_limit = "1 A"
voltage = "12 V"           # when it is on

  [supply.commands]        # only where they are not the usual ones; %g is the value
  set = "U2 %g"
  limit = "I2 %g"
  on = "ON 2"
  off = "OFF 2"
  read = "U2?"
  identify = "*IDN?"
  errors = "SYST:ERR?"
`
