"""What `margins` tells beside its figures: `details["margins"]` of the verdict, plain values for reports.

    loop, controller, broken_at      texts: its name, its controller as the spec writes it, plant_input or plant_output
    measures, moves, inside          lists of names; `inside`: loops that are closed inside this one
    delay, sample                    quantities; absent where there is none (a continuous loop has no `sample`)
    frequency_unit                   of every `frequency` below: rad per time unit of the plant
    stable                           true or false; of an unstable loop nothing but poles follows
    channels                         a list, one a channel of the break, each with the other channels closed:
        channel                      its name: what is moved, or what is measured
        gain_up, gain_down           met figures; factors above and below one, gain_down 0 where any decrease is allowed
        phase                        met figure in deg: the smaller of what may be added and taken away
        delay                        met figure, beyond what is declared
        sensitivity_peak, complementary_peak      met figures, ratios
        disk                         met figure (see `disk` below)
        crossovers                   list of {frequency, phase (deg left until instability, signed)}
        phase_crossings              list of {frequency, gain (the factor that would make the loop unstable)}
    all_channels                     only where there are several:
        sensitivity_peak, complementary_peak      met figures at the break: the largest singular value
        disk                         {input, output, both}: met figures, all channels at once
    steps                            list of {channel, overshoot (%), settling, within (%), final}, set point to measured
    closed_loop_poles                list of poles that the loop moves
    unmoved_poles                    list of poles with {states: {name: share}, excused: true where `leaves` covers it}
    limits                           list of {word, text} and, of ready-made limits, {rule, source, caution}

A quantity is {value, unit}. A met figure is {value, unit, error} and, where it was met at one, {frequency}; infinite
values stand as such. A disk margin has {guaranteed: {gain_down, gain_up (factors), phase (deg)}} beside. A pole is
{real, imag, natural_frequency, damping, time_constant}, of a sampled loop with {z_real, z_imag}; the first pair is then
log(z) / sample. What could not be found is left out.
"""
