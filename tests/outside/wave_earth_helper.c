/* Prints our sidereal time, station positions and celestial-to-terrestrial rotation for tests/outside/astropy_test.py.
 */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "server/base/clock.h"
#include "server/wave/constants.h"
#include "server/wave/response.h"

/* gmst GPS | site LATITUDE LONGITUDE HEIGHT | delay GPS LATITUDE LONGITUDE HEIGHT RA DEC | light LAT LON H LAT LON H */
int main(int argc, char **argv)
{
	struct wave_station s = {0}, t = {0};
	struct wave_earth earth;
	struct wave_response r;
	int64_t gps;
	double v[8];
	for (int i = 2; i < argc && i < 10; i++)
		v[i - 2] = atof(argv[i]);
	if (argc == 3 && strcmp(argv[1], "gmst") == 0 && clock_gps_parse(argv[2], &gps)) {
		printf("%.17g\n", earth_sidereal_rad(gps, 0));
	} else if (argc == 5 && strcmp(argv[1], "site") == 0) {
		s.latitude_rad = v[0] * WAVE_PI / 180;
		s.longitude_rad = v[1] * WAVE_PI / 180;
		s.height_m = v[2];
		station_survey(&s);
		printf("%.9f %.9f %.9f\n", s.position_m[0], s.position_m[1], s.position_m[2]);
	} else if (argc == 8 && strcmp(argv[1], "delay") == 0 && clock_gps_parse(argv[2], &gps)) {
		s.latitude_rad = v[1] * WAVE_PI / 180;
		s.longitude_rad = v[2] * WAVE_PI / 180;
		s.height_m = v[3];
		s.arm_length_m = 4000;
		station_survey(&s);
		earth_at(gps, 0, WAVE_PRECISE, &earth);
		response_at(&s, &earth, v[4], v[5], 0, &r);
		printf("%.12g\n", r.delay_s);
	} else if (argc == 8 && strcmp(argv[1], "light") == 0) {
		s = (struct wave_station){
		    .latitude_rad = v[0] * WAVE_PI / 180, .longitude_rad = v[1] * WAVE_PI / 180, .height_m = v[2]};
		t = (struct wave_station){
		    .latitude_rad = v[3] * WAVE_PI / 180, .longitude_rad = v[4] * WAVE_PI / 180, .height_m = v[5]};
		station_survey(&s);
		station_survey(&t);
		printf("%.9g\n", station_light_time_s(&s, &t));
	} else {
		return 2;
	}
	return 0;
}
