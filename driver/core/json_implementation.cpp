// Boost.JSON's own code, compiled once for the driver and the tools. Other sources include <boost/json.hpp>.
#include <boost/json/src.hpp>
