drop index matter_closed;
