// What a panel gives as the light grows, and what resistance in its leads costs. Where the power is highest it does not
// change with the voltage, so its derivative at a fixed voltage tells the whole cost (the envelope theorem).
//
// Panel and light are invented. A module in light is always live, and strings of modules reach voltages and currents that
// kill and start fires: electrical design and work follow local codes and licensed practice.
#define SOLAR_DIODE_IMPLEMENTATION      // in this one source file of the program
#include "solar_diode.h"

#include "panel.hpp"

#include <cstdio>

int main()
{
    std::puts("light (W/m^2)   open circuit (V)   strongest (V)   current (A)   power (W)   per ohm of leads (W)");
    for (const double light : {200.0, 400.0, 600.0, 800.0, 1000.0}) {
        const Panel panel(8.2*light/1000.0, 2.0e-10, 0.35, 400.0*1000.0/light, 1.55);
        const auto best = panel.strongest();
        if (!best) {
            return 1;
        }
        std::printf("%13.0f   %16.3f   %13.3f   %11.4f   %9.3f   %20.2f\n", light, panel.open_circuit(), best->voltage,
                    best->current, best->power, best->power_by_series);
    }
    return 0;
}
