// A photovoltaic panel as a C++ class over the single header of solar_diode. Volts, amperes, watts, ohms.
#pragma once

#include "solar_diode.h"

#include <array>
#include <cmath>
#include <limits>
#include <optional>

class Panel {
public:
    struct Point {
        double voltage, current, power;
        double power_by_voltage, power_by_series;       // derivatives of the power at this point
    };

    // The five parameters of the single-diode model, for the light and the temperature of the moment.
    Panel(double photocurrent, double saturation, double series, double shunt, double ideality)
        : parameters{photocurrent, saturation, series, shunt, ideality, 0.0},
          highest(ideality*std::log1p(photocurrent/saturation))
    {
    }

    // The operating point at a voltage; none beyond open circuit.
    std::optional<Point> at(double voltage) const
    {
        std::array<double, 6> p = parameters;
        p[5] = voltage;
        solar_diode_point r;
        std::array<double, 12> jac;                     // rows I, P; columns IL, I0, Rs, Rsh, a, V
        if (solar_diode_solve_jacobian(p.data(), std::numeric_limits<double>::quiet_NaN(), &r, jac.data()) < 0) {
            return std::nullopt;
        }
        return Point{voltage, r.y[0], r.y[1], jac[11], jac[8]};
    }

    double open_circuit() const
    {
        return last([](const Point &point) { return point.current > 0.0; });
    }

    // Where the panel gives most: there the slope of the power, which falls all the way, changes sign. The closure
    // differentiates its root, so that slope is exact, and so is the place.
    std::optional<Point> strongest() const
    {
        return at(last([](const Point &point) { return point.power_by_voltage > 0.0; }));
    }

private:
    // The last voltage at whose point something holds that holds from short circuit on, by halving.
    template <class Property> double last(Property holds) const
    {
        double low = 0.0, high = highest;
        for (int k = 0; k < 60; ++k) {
            const double middle = 0.5*(low + high);
            const auto point = at(middle);
            (point && holds(*point) ? low : high) = middle;
        }
        return low;
    }

    std::array<double, 6> parameters;                   // as the closure takes them; the last is the voltage
    double highest;                                     // open circuit without a shunt
};
