/* hushwatchd: the daemon. */
int main(void)
{
    return 2;
}
