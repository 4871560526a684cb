drop table plant_settings;
